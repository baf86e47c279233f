/*
 * command_impl.h - what main.c, arguments.c and help.c share, and the entries of the table.
 */
#ifndef COMMAND_COMMAND_IMPL_H
#define COMMAND_COMMAND_IMPL_H

#include <stdio.h>

#include "command/command.h"

/* Sorts words into arguments and options, and checks them against the entry. `out` is usable by
 * command_fail() and arguments_free() even on failure. */
MUST_CHECK int arguments_parse(const struct command *command, int count, char **words,
                               struct arguments *out, struct err *err);
void arguments_free(struct arguments *arguments);

/* Prints a command's help; returns EXIT_DONE. */
int help_command(const struct command *command, FILE *to);

/* Prints `text` wrapped at 80 columns, every line indented. */
void help_wrap(FILE *to, int indent, const char *text);

/* A topic of `incisura help TOPIC` that is no command. */
struct topic {
    const char *name, *summary;
    void (*print)(FILE *to);
};
extern const struct topic topics[]; /* ends with a NULL name */

extern const struct command command_attach;
extern const struct command command_derive;
extern const struct command command_export;
extern const struct command command_frame;
extern const struct command command_help;
extern const struct command command_history;
extern const struct command command_import;
extern const struct command command_inspect;
extern const struct command command_mark;
extern const struct command command_marks;
extern const struct command command_live;
extern const struct command command_review;
extern const struct command command_start;

#endif
