/*
 * command.h - the commands table: `incisura COMMAND [ARG ...] [--option VALUE]`.
 *
 * To add a command: one new file with a `const struct command`, and one line in the table in
 * main.c. The entry is also its help and its part of the man page.
 *
 * Results go to stdout, talk to stderr. A command returns its exit status: 0 done, 1 found
 * something wrong in the data, 2 could not do it (after command_fail()).
 */
#ifndef COMMAND_COMMAND_H
#define COMMAND_COMMAND_H

#include <stdbool.h>
#include <stddef.h>

#include "base/err.h"
#include "case/casefile.h"

enum { EXIT_DONE = 0, EXIT_FINDINGS = 1, EXIT_FAILED = 2 };
enum { OPTION_MAX = 24 };

struct option_spec {
    const char *name;  /* "until", used as --until; NULL ends the list */
    const char *value; /* "TIME" in help; NULL = a flag without a value */
    bool many;         /* may be given more than once */
    const char *help;
};

struct command;

/* What was typed, checked against the entry: unknown options, missing values and too few or too
 * many arguments never reach run(). */
struct arguments {
    const struct command *command;
    const char *const *args; /* shape (count), without the command's name */
    size_t count;
    const char **values[OPTION_MAX]; /* one list per option in spec order */
    size_t value_count[OPTION_MAX];
    const char **pool; /* memory of args and values */
    bool help;         /* --help was given: print it instead of running */
};

struct command {
    const char *name;
    const char *args;    /* "CASE FILE..." in help */
    size_t least, most;  /* number of arguments */
    const char *summary; /* one line */
    const char *detail;  /* paragraphs for `help NAME`, wrapped at 80 */
    const struct option_spec *options;
    int (*run)(const struct arguments *arguments);
};

extern const struct command *const commands[]; /* NULL-terminated */

/* Value of an option: the last given, or NULL. `name` must be in the command's list. */
const char *argument(const struct arguments *arguments, const char *name);
bool argument_flag(const struct arguments *arguments, const char *name);
/* All values of a `many` option. */
const char *const *argument_all(const struct arguments *arguments, const char *name, size_t *count);

/* Prints "incisura COMMAND: TEXT" on stderr; returns EXIT_FAILED. */
int command_fail(const struct arguments *arguments, const struct err *err);

/* Options that several commands share: their specs, for use inside an option list. */
#define OPTION_RATER                                                          \
    {                                                                         \
        "rater", "ID", false, "who does this; default: the rater of the case" \
    }
#define OPTION_JSON                                 \
    {                                               \
        "json", NULL, false, "print one JSON value" \
    }
#define OPTION_RATE                                                                   \
    {                                                                                 \
        "rate", "HZ", false, "samples a second, for a CSV file without a time column" \
    }
#define OPTION_UNIT                                                                     \
    {                                                                                   \
        "unit", "LABEL=UNIT", true, "unit of a CSV column whose header does not say it" \
    }
#define OPTION_ROLE                                                             \
    {                                                                           \
        "role", "LABEL=ROLE", true,                                             \
            "what a channel is (ecg, abp, eda ...) when its label does not say" \
    }

/* Opens args[0] as a case (or, in STORE_READ mode, a bare recording, with the reader options of
 * the command line when the command has them). "NAME" stands for NAME.case when only that exists.
 * --rater is used when the command has it. */
MUST_CHECK int command_open(const struct arguments *arguments, enum store_mode mode,
                            struct casefile **out, struct err *err);

/* The case named by args[0] for a live session: of what earlier ones left, recordings larger than
 * `most_bytes` wait, as a person in theatre cannot. */
MUST_CHECK int command_open_live(const struct arguments *arguments, int64_t most_bytes,
                                 struct casefile **out, struct err *err);

/* The case named by args[0], its store alone, for reading. */
MUST_CHECK int command_open_store(const struct arguments *arguments, struct store **out,
                                  struct err *err);

/* --rate, --unit and --role as reader options; lists point into `arguments`. */
MUST_CHECK int command_reader_options(const struct arguments *arguments, struct reader_options *out,
                                      struct err *err);

/* A long job between begin and end: how far it is, on stderr when that is a terminal (on a thread
 * of its own, so that the job only counts), and ^C cancels `progress` instead of ending the
 * program. */
struct progress_line;
struct progress_line *progress_line_begin(const char *what, struct progress *progress);
void progress_line_end(struct progress_line *line); /* NULL is allowed */

#endif
