/*
 * main.c - the commands table and the way in. What a command does is in its own file.
 */
#include <locale.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "base/version.h"
#include "command/command.h"
#include "command/command_impl.h"

const struct command *const commands[] = {
    &command_start,   &command_attach,
    &command_live,    &command_review,
    &command_mark,    &command_marks,
    &command_import,  &command_history,
    &command_inspect, &command_derive,
    &command_export,  &command_frame,
    &command_help,    NULL,
};

static const struct command *find(const char *name)
{
    for (size_t i = 0; commands[i]; i++) {
        if (strcmp(commands[i]->name, name) == 0)
            return commands[i];
    }
    return NULL;
}

/* Characters alone: numbers keep their decimal point. Where nothing is said about the locale, as on
 * a bare system, the terminal is taken to show UTF-8, which nearly all do; LC_ALL=C says otherwise.
 */
static void set_characters(void)
{
    static const char *const said_by[] = {"LC_ALL", "LC_CTYPE", "LANG"};
    bool said = false;
    for (size_t i = 0; i < sizeof said_by / sizeof *said_by; i++) {
        const char *value = getenv(said_by[i]);
        said |= value && *value;
    }
    /* A locale that is not installed leaves plain ASCII. */
    (void)setlocale(LC_CTYPE, said ? "" : "C.UTF-8");
}

int main(int count, char **words)
{
    set_characters();
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
