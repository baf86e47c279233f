/*
 * arguments.c - sorting the command line. Knows options only from the command's entry.
 */
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "command/command_impl.h"

static int option_index(const struct command *command, const char *name, size_t length)
{
    for (int i = 0; command->options && command->options[i].name; i++) {
        if (strlen(command->options[i].name) == length &&
            strncmp(command->options[i].name, name, length) == 0)
            return i;
    }
    return -1;
}

/* `word` begins with "--". Uses the next word as value when it needs one and has no "=". */
static int take_option(struct arguments *out, const char *word, const char *next, bool *used_next,
                       struct err *err)
{
    const char *name = word + 2, *equals = strchr(name, '=');
    size_t length = equals ? (size_t)(equals - name) : strlen(name);
    int index = option_index(out->command, name, length);
    if (index < 0)
        return err_set(err, ERR_USAGE, "no option '--%.*s'; `incisura help %s` lists them",
                       (int)length, name, out->command->name);
    const struct option_spec *spec = &out->command->options[index];
    const char *value = equals ? equals + 1 : NULL;
    if (!spec->value && value)
        return err_set(err, ERR_USAGE, "option --%s takes no value", spec->name);
    if (spec->value && !value) {
        if (!next)
            return err_set(err, ERR_USAGE, "option --%s needs a value: --%s %s", spec->name,
                           spec->name, spec->value);
        value = next;
        *used_next = true;
    }
    if (out->value_count[index] > 0 && !spec->many)
        return err_set(err, ERR_USAGE, "option --%s is given twice", spec->name);
    out->values[index][out->value_count[index]++] = value ? value : "";
    return ERR_OK;
}

static int check_count(const struct arguments *out, struct err *err)
{
    const struct command *command = out->command;
    if (out->count < command->least)
        return err_set(err, ERR_USAGE, "too few arguments; usage: incisura %s %s", command->name,
                       command->args);
    if (out->count > command->most)
        return err_set(err, ERR_USAGE, "unexpected argument '%s'; usage: incisura %s %s",
                       out->args[command->most], command->name, command->args);
    return ERR_OK;
}

int arguments_parse(const struct command *command, int count, char **words, struct arguments *out,
                    struct err *err)
{
    *out = (struct arguments){.command = command};
    size_t options = 0, each = (size_t)count + 1;
    while (command->options && command->options[options].name)
        options++;
    void *pool = NULL;
    int failed = array_new(&pool, (options + 1) * each, sizeof *out->pool, err);
    if (failed)
        return failed;
    out->pool = pool;
    out->args = out->pool;
    for (size_t i = 0; i < options; i++)
        out->values[i] = out->pool + (i + 1) * each;
    bool only_arguments = false;
    for (int i = 0; i < count && !failed; i++) {
        const char *word = words[i];
        bool used_next = false;
        if (only_arguments || strncmp(word, "--", 2) != 0)
            out->pool[out->count++] = word;
        else if (strcmp(word, "--") == 0)
            only_arguments = true;
        else if (strcmp(word, "--help") == 0)
            out->help = true;
        else
            failed = take_option(out, word, i + 1 < count ? words[i + 1] : NULL, &used_next, err);
        i += used_next;
    }
    if (!failed && !out->help)
        failed = check_count(out, err);
    return failed;
}

void arguments_free(struct arguments *arguments)
{
    free((void *)arguments->pool);
    *arguments = (struct arguments){0};
}

const char *const *argument_all(const struct arguments *arguments, const char *name, size_t *count)
{
    int index = option_index(arguments->command, name, strlen(name));
    *count = index < 0 ? 0 : arguments->value_count[index];
    return index < 0 ? NULL : arguments->values[index];
}

const char *argument(const struct arguments *arguments, const char *name)
{
    size_t count;
    const char *const *values = argument_all(arguments, name, &count);
    return count > 0 ? values[count - 1] : NULL;
}

bool argument_flag(const struct arguments *arguments, const char *name)
{
    return argument(arguments, name) != NULL;
}
