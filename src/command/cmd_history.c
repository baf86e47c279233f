/*
 * cmd_history.c - `history` prints who changed what and when, or verifies the chain.
 */
#include <inttypes.h>
#include <jansson.h>
#include <stdio.h>
#include <string.h>

#include "base/str.h"
#include "command/command_impl.h"

static const struct option_spec options[] = {
    {"verify", NULL, false, "check the chain and that the case is what its history says"},
    {"csv", NULL, false, "print CSV, one line a row"},
    OPTION_JSON,
    {0},
};

struct printing {
    bool csv, json;
    struct str line;
    bool any;
};

static void print_text(const struct history_row *row)
{
    char when[TIME_TEXT_SIZE];
    ns_format_civil(row->utc_ns / NS_PER_MS * NS_PER_MS, when);
    (void)printf("%5" PRId64 "  %-23sZ  %-8s %-12s", row->seq, when, row->rater, row->action);
    if (row->object > 0)
        (void)printf(" %" PRId64, row->object);
    if (*row->before)
        (void)printf("  was %s", row->before);
    if (*row->after)
        (void)printf("  %s %s", *row->before ? "now" : "", row->after);
    if (*row->why)
        (void)printf("  because: %s", row->why);
    (void)putchar('\n');
}

static void print_csv(struct printing *printing, const struct history_row *row)
{
    struct str *line = &printing->line;
    char when[TIME_TEXT_SIZE];
    str_clear(line);
    ns_format_civil(row->utc_ns, when);
    str_putf(line, "%" PRId64 ",%sZ,", row->seq, when);
    str_put_csv(line, row->rater);
    str_putc(line, ',');
    str_put_csv(line, row->program);
    str_putf(line, ",%s,%" PRId64 ",", row->action, row->object);
    str_put_csv(line, row->before);
    str_putc(line, ',');
    str_put_csv(line, row->after);
    str_putc(line, ',');
    str_put_csv(line, row->why);
    str_putf(line, ",%s", row->digest);
    (void)puts(str_text(line));
}

/* Before and after are JSON already: parsed, so that they nest. */
static json_t *nested(const char *text)
{
    json_t *value = *text ? json_loads(text, JSON_DECODE_ANY, NULL) : NULL;
    if (value)
        return value;
    return *text ? json_string(text) : json_null();
}

static int print_json(struct printing *printing, const struct history_row *row)
{
    char when[TIME_TEXT_SIZE + 1];
    ns_format_civil(row->utc_ns, when);
    (void)strcat(when, "Z");
    json_t *value =
        json_pack("{s:I, s:s, s:s, s:s, s:s, s:I, s:o, s:o, s:s, s:s}", "seq", (json_int_t)row->seq,
                  "utc", when, "rater", row->rater, "program", row->program, "action", row->action,
                  "object", (json_int_t)row->object, "before", nested(row->before), "after",
                  nested(row->after), "why", row->why, "digest", row->digest);
    if (!value)
        return ERR_MEMORY;
    (void)fputs(printing->any ? ",\n" : "[\n", stdout);
    printing->any = true;
    int failed = json_dumpf(value, stdout, 0) != 0;
    json_decref(value);
    return failed ? ERR_IO : ERR_OK;
}

static int print_row(const struct history_row *row, void *context)
{
    struct printing *printing = context;
    if (printing->json)
        return print_json(printing, row);
    if (printing->csv)
        print_csv(printing, row);
    else
        print_text(row);
    return ERR_OK;
}

static int print_all(const struct arguments *arguments, struct store *store, struct err *err)
{
    struct printing printing = {.csv = argument_flag(arguments, "csv"),
                                .json = argument_flag(arguments, "json")};
    if (printing.csv)
        (void)puts("seq,utc,rater,program,action,object,before,after,why,digest");
    int failed = store_history(store, print_row, &printing, err);
    if (!failed && printing.json)
        (void)puts(printing.any ? "\n]" : "[]");
    if (failed && !err->code)
        failed = err_set(err, ERR_IO, "standard output: cannot write the history");
    str_free(&printing.line);
    return failed;
}

/* A history that does not verify is a finding in the data, not a failure of the command. */
static int verify(struct store *store, int *status, struct err *err)
{
    int64_t rows, bad_seq;
    char head[DIGEST_TEXT_SIZE];
    int failed = store_verify(store, &rows, &bad_seq, head, err);
    if (failed == ERR_CONFLICT) {
        (void)printf("NOT AS WRITTEN: %s\n", err->text);
        *status = EXIT_FINDINGS;
        return ERR_OK;
    }
    if (!failed)
        (void)printf("%" PRId64 " rows verify; the last digest is\n%s\nKeep it outside this "
                     "machine: it proves later that nothing was cut off the end.\n",
                     rows, head);
    return failed;
}

static int run(const struct arguments *arguments)
{
    struct err err = {0};
    struct store *store = NULL;
    int status = EXIT_DONE;
    /* The store alone: a history must be readable when the recordings are not. */
    int failed = command_open_store(arguments, &store, &err);
    if (!failed)
        failed = argument_flag(arguments, "verify") ? verify(store, &status, &err)
                                                    : print_all(arguments, store, &err);
    store_close(store);
    return failed ? command_fail(arguments, &err) : status;
}

const struct command command_history = {
    .name = "history",
    .args = "CASE",
    .least = 1,
    .most = 1,
    .summary = "who changed what and when; --verify checks that nothing was altered",
    .detail = "Every change of a case is a row that is never changed or removed; each carries a "
              "BLAKE2b-256 digest of itself and the row before. --verify recomputes all of them "
              "and compares the marks and recordings with what the rows say; it exits 1 and names "
              "the first that differs.",
    .options = options,
    .run = run,
};
