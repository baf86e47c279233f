/*
 * cmd_review.c - `review` opens a case, or a recording alone, on the terminal.
 */
#include <unistd.h>

#include "command/command.h"
#include "terminal/review.h"

static const struct option_spec review_options[] = {
    OPTION_RATER,
    {"at", "TIME", false, "where to begin; default: the start of the case"},
    {"read-only", NULL, false, "look, and change nothing"},
    OPTION_RATE,
    OPTION_UNIT,
    OPTION_ROLE,
    {0},
};

/* For writing when it is a case that can be written, for reading otherwise; `why` then says why
 * it cannot be written. */
static int open_here(const struct arguments *arguments, struct casefile **out, struct err *why,
                     struct err *err)
{
    if (argument_flag(arguments, "read-only"))
        return command_open(arguments, STORE_READ, out, err);
    int failed = command_open(arguments, STORE_WRITE, out, why);
    if (failed)
        failed = command_open(arguments, STORE_READ, out, err);
    /* A recording alone is no case to be written, and the screen says so anyway. */
    if (!failed && !casefile_store(*out))
        *why = (struct err){0};
    return failed;
}

static int run_review(const struct arguments *arguments)
{
    struct err err = {0}, why = {0};
    struct casefile *casefile = NULL;
    int64_t at_ns = NS_NONE;
    if (!isatty(STDIN_FILENO) || !isatty(STDOUT_FILENO)) {
        (void)err_set(&err, ERR_USAGE,
                      "needs a terminal; `incisura frame` prints the same screen as text");
        return command_fail(arguments, &err);
    }
    const char *at = argument(arguments, "at");
    int failed = open_here(arguments, &casefile, &why, &err);
    if (!failed && at)
        failed = casefile_time(casefile, at, &at_ns, &err);
    if (!failed)
        failed = casefile_overviews(casefile, 2, &err);
    if (!failed)
        failed = review_run(casefile, at_ns, why.text, &err);
    casefile_close(casefile);
    return failed ? command_fail(arguments, &err) : EXIT_DONE;
}

const struct command command_review = {
    .name = "review",
    .args = "CASE|FILE",
    .least = 1,
    .most = 1,
    .summary = "look at the traces and mark what happened",
    .detail = "Opens the case on the terminal. Letters drop marks of the case's codebook at the "
              "cursor; ? shows every key. A recording that is in no case, and a case that cannot "
              "be written, are opened for reading.",
    .options = review_options,
    .run = run_review,
};
