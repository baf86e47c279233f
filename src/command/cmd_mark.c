/*
 * cmd_mark.c - `mark` puts one mark into a case, `marks` lists them.
 */
#include <inttypes.h>
#include <jansson.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "base/str.h"
#include "command/command_impl.h"
#include "case/mark_entry.h"

static const struct option_spec mark_options[] = {
    {"at", "TIME", false, "when (required): 09:41:12.250, +00:34:07.5 or an ISO 8601 time"},
    {"until", "TIME", false, "when it ended, for a span"},
    {"value", "NUMBER", false, "dose, rate or setting"},
    {"unit", "UNIT", false, "of the value (UCUM); default: the codebook's"},
    {"route", "TEXT", false, "iv, im, sc, ep ..."},
    {"note", "TEXT", false, "free text"},
    {"why", "TEXT", false, "reason, for the history"},
    OPTION_RATER,
    {0},
};

/* "+00:12:03.250 (09:12:03.250)", the second part where the case's wall clock is known. */
static void put_times(const struct casefile *casefile, int64_t case_ns, char out[96])
{
    char elapsed[TIME_TEXT_SIZE], day[TIME_TEXT_SIZE];
    int64_t epoch = casefile_epoch_civil_ns(casefile);
    ns_format_elapsed(case_ns, 3, elapsed);
    if (epoch == NS_NONE) {
        (void)snprintf(out, 96, "%s", elapsed);
        return;
    }
    ns_format_day(epoch + case_ns, 3, day);
    (void)snprintf(out, 96, "%s (%s)", elapsed, day);
}

static int add(const struct arguments *arguments, struct casefile *casefile, struct arena *arena,
               struct err *err)
{
    struct mark_text text = {
        .code = arguments->args[1],
        .at = argument(arguments, "at"),
        .until = argument(arguments, "until"),
        .value = argument(arguments, "value"),
        .unit = argument(arguments, "unit"),
        .route = argument(arguments, "route"),
        .note = argument(arguments, "note"),
    };
    const char *why = argument(arguments, "why");
    if (!text.at)
        return err_set(err, ERR_USAGE, "when? give --at TIME");
    struct mark mark;
    int64_t id;
    int failed = mark_entry(casefile, &text, arena, &mark, err);
    mark.source = MARK_COMMAND;
    if (!failed)
        failed = store_mark_add(casefile_store(casefile), &mark, why ? why : "", &id, err);
    if (failed)
        return failed;
    char when[96];
    put_times(casefile, mark.onset_ns, when);
    (void)printf("%" PRId64 " %s at %s%s\n", id, mark.code, when,
                 mark.state == MARK_INCOMPLETE ? ", incomplete" : "");
    return ERR_OK;
}

static int run_mark(const struct arguments *arguments)
{
    struct err err = {0};
    struct arena arena = {0};
    struct casefile *casefile = NULL;
    int failed = command_open(arguments, STORE_WRITE, &casefile, &err);
    if (!failed)
        failed = add(arguments, casefile, &arena, &err);
    casefile_close(casefile);
    arena_free(&arena);
    return failed ? command_fail(arguments, &err) : EXIT_DONE;
}

const struct command command_mark = {
    .name = "mark",
    .args = "CASE CODE --at TIME",
    .least = 2,
    .most = 2,
    .summary = "put a mark into a case",
    .detail = "CODE is a code or a label of the case's codebook. A dose, rate or setting without a "
              "value, and a span without an end, is kept as incomplete.",
    .options = mark_options,
    .run = run_mark,
};

static const struct option_spec marks_options[] = {
    {"code", "CODE", true, "only these codes"},
    {"state", "STATE", true, "only these: incomplete, marked, confirmed, rejected"},
    {"csv", NULL, false, "print CSV, one line a mark"},
    OPTION_JSON,
    {0},
};

static bool among(const char *const *list, size_t count, const char *text)
{
    bool found = count == 0;
    for (size_t i = 0; i < count && !found; i++)
        found = ascii_equal(list[i], text);
    return found;
}

static double seconds_or_nan(int64_t ns)
{
    return ns == NS_NONE ? (double)NAN : s_from_ns(ns);
}

static void print_text(const struct casefile *casefile, const struct mark *mark)
{
    char when[96], until[TIME_TEXT_SIZE] = "";
    put_times(casefile, mark->onset_ns, when);
    if (mark->until_ns != NS_NONE)
        ns_format_elapsed(mark->until_ns, 3, until);
    struct str value = {0};
    if (mark->has_value) {
        str_put_double(&value, mark->value);
        str_putf(&value, " %s", mark->unit);
    }
    (void)printf("%5" PRId64 "  %-30s %-20s %-10s %s%s%s%s%s%s%s\n", mark->id, when, mark->code,
                 mark_state_name(mark->state), str_text(&value), *mark->route ? " " : "",
                 mark->route, *until ? " until " : "", until, *mark->note ? "  " : "", mark->note);
    str_free(&value);
}

static int print_csv(const struct mark *mark, struct err *err)
{
    struct str line = {0};
    str_putf(&line, "%" PRId64 ",", mark->id);
    str_put_csv(&line, mark->code);
    str_putc(&line, ',');
    str_put_double(&line, s_from_ns(mark->onset_ns));
    str_putc(&line, ',');
    str_put_double(&line, seconds_or_nan(mark->until_ns));
    str_putc(&line, ',');
    str_put_double(&line, mark->has_value ? mark->value : (double)NAN);
    const char *texts[] = {mark->unit,
                           mark->route,
                           mark->note,
                           mark_state_name(mark->state),
                           mark_source_name(mark->source),
                           mark->rater};
    for (size_t i = 0; i < sizeof texts / sizeof *texts; i++) {
        str_putc(&line, ',');
        str_put_csv(&line, texts[i]);
    }
    (void)puts(str_text(&line));
    int failed = str_failed(&line) ? err_memory(err, "a mark") : ERR_OK;
    str_free(&line);
    return failed;
}

static json_t *number_or_null(double value, bool there)
{
    return there ? json_real(value) : json_null();
}

static json_t *mark_json(const struct mark *mark)
{
    return json_pack(
        "{s:I, s:s, s:f, s:o, s:o, s:s, s:s, s:s, s:s, s:s, s:s, s:f, s:s, s:o, s:I}", "id",
        (json_int_t)mark->id, "code", mark->code, "onset_s", s_from_ns(mark->onset_ns), "until_s",
        number_or_null(seconds_or_nan(mark->until_ns), mark->until_ns != NS_NONE), "value",
        number_or_null(mark->value, mark->has_value), "unit", mark->unit, "route", mark->route,
        "note", mark->note, "state", mark_state_name(mark->state), "source",
        mark_source_name(mark->source), "rater", mark->rater, "error_s", s_from_ns(mark->error_ns),
        "stamp_clock", mark->stamp_clock, "stamp_ns",
        mark->stamp_ns == NS_NONE ? json_null() : json_integer(mark->stamp_ns), "stamp_utc_ns",
        (json_int_t)mark->stamp_utc_ns);
}

static int print_json(const struct mark *const *marks, size_t count, struct err *err)
{
    json_t *list = json_array();
    int failed = list ? ERR_OK : err_memory(err, "the list of marks");
    for (size_t i = 0; i < count && !failed; i++) {
        if (json_array_append_new(list, mark_json(marks[i])) != 0)
            failed = err_memory(err, "the list of marks");
    }
    if (!failed && json_dumpf(list, stdout, JSON_INDENT(1) | JSON_REAL_PRECISION(15)) == 0)
        (void)putchar('\n');
    json_decref(list);
    return failed;
}

static int print_marks(const struct arguments *arguments, const struct casefile *casefile,
                       const struct mark *const *marks, size_t count, struct err *err)
{
    if (argument_flag(arguments, "json"))
        return print_json(marks, count, err);
    if (argument_flag(arguments, "csv"))
        (void)puts("id,code,onset_s,until_s,value,unit,route,note,state,source,rater");
    int failed = ERR_OK;
    for (size_t i = 0; i < count && !failed; i++) {
        if (argument_flag(arguments, "csv"))
            failed = print_csv(marks[i], err);
        else
            print_text(casefile, marks[i]);
    }
    return failed;
}

static int list(const struct arguments *arguments, struct casefile *casefile, struct err *err)
{
    size_t code_count, state_count, count = 0, kept = 0;
    const char *const *codes = argument_all(arguments, "code", &code_count);
    const char *const *states = argument_all(arguments, "state", &state_count);
    enum mark_state known;
    for (size_t i = 0; i < state_count; i++) {
        if (!mark_state_from_name(states[i], &known))
            return err_set(err, ERR_USAGE,
                           "no state '%s'; states are incomplete, marked, confirmed, rejected",
                           states[i]);
    }
    if (!casefile_store(casefile))
        return err_set(err, ERR_USAGE, "%s: a recording, not a case; it holds no marks",
                       casefile_path(casefile));
    const struct mark *marks;
    int failed = store_marks(casefile_store(casefile), &marks, &count, err);
    const struct mark **chosen = failed ? NULL : calloc(count + 1, sizeof *chosen);
    if (!failed && !chosen)
        failed = err_memory(err, "the list of marks");
    for (size_t i = 0; i < count && !failed; i++) {
        if (among(codes, code_count, marks[i].code) &&
            among(states, state_count, mark_state_name(marks[i].state)))
            chosen[kept++] = &marks[i];
    }
    if (!failed)
        failed = print_marks(arguments, casefile, chosen, kept, err);
    free((void *)chosen);
    return failed;
}

static int run_marks(const struct arguments *arguments)
{
    struct err err = {0};
    struct casefile *casefile = NULL;
    int failed = command_open(arguments, STORE_READ, &casefile, &err);
    if (!failed)
        failed = list(arguments, casefile, &err);
    casefile_close(casefile);
    return failed ? command_fail(arguments, &err) : EXIT_DONE;
}

const struct command command_marks = {
    .name = "marks",
    .args = "CASE",
    .least = 1,
    .most = 1,
    .summary = "list the marks of a case",
    .detail = "In order of time, rejected ones too. Times are from the case's start; in CSV and "
              "JSON in seconds.",
    .options = marks_options,
    .run = run_marks,
};
