/*
 * main.c - the commands table and the way in. What a command does is in its own file.
 */
#include <locale.h>
#include <stdio.h>
#include <string.h>

#include "base/version.h"
#include "command/command.h"
#include "command/command_impl.h"

const struct command *const commands[] = {
    &command_start,
    &command_attach,
    &command_review,
    &command_mark,
    &command_marks,
    &command_import,
    &command_history,
    &command_inspect,
    &command_derive,
    &command_export,
    &command_frame,
    &command_help,
    NULL,
};

static const struct command *find(const char *name)
{
    for (size_t i = 0; commands[i]; i++) {
        if (strcmp(commands[i]->name, name) == 0)
            return commands[i];
    }
    return NULL;
}

int main(int count, char **words)
{
    (void)setlocale(LC_CTYPE, "");
    const char *name = count > 1 ? words[1] : "help";
    if (strcmp(name, "--version") == 0) {
        (void)printf("incisura %s\n", INCISURA_VERSION);
        return EXIT_DONE;
    }
    if (strcmp(name, "--help") == 0 || strcmp(name, "-h") == 0)
        name = "help";
    const struct command *command = find(name);
    if (!command) {
        (void)fprintf(stderr, "incisura: no command '%s'; `incisura help` lists them\n", name);
        return EXIT_FAILED;
    }
    struct arguments arguments;
    struct err err = {0};
    int skip = count > 1 ? 2 : 1;
    int failed = arguments_parse(command, count - skip, words + skip, &arguments, &err);
    int status;
    if (failed)
        status = command_fail(&arguments, &err);
    else if (arguments.help)
        status = help_command(command, stdout);
    else
        status = command->run(&arguments);
    arguments_free(&arguments);
    /* What a full disk or a closed pipe swallowed must not end as success. */
    if (fflush(stdout) != 0 || ferror(stdout)) {
        (void)err_errno(&err, "standard output", "write");
        (void)fprintf(stderr, "incisura %s: %s\n", name, err.text);
        status = EXIT_FAILED;
    }
    return status;
}
