/*
 * cmd_derive.c - `derive` prints a derived trace or event train of a case or a bare recording.
 */
#include <inttypes.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>

#include "base/str.h"
#include "command/command_impl.h"

static const struct option_spec options[] = {
    {"channel", "LABEL", false, "the channel to derive from; default: by role"},
    {"set", "NAME=VALUE", true, "a parameter of the derivation"},
    {"from", "TIME", false, "only from here on"},
    {"to", "TIME", false, "only up to here"},
    OPTION_RATE,
    OPTION_UNIT,
    OPTION_ROLE,
    {0},
};

enum { PIECE = 4096 };

struct window {
    int64_t from_ns, to_ns;
};

static void flush_text(struct str *text)
{
    (void)fwrite(str_text(text), 1, text->length, stdout);
    str_clear(text);
}

static int print_trace(const struct trace *trace, struct window window, struct err *err)
{
    int64_t first, count;
    float values[PIECE];
    struct str text = {0};
    int failed = ERR_OK;
    trace_range(trace, window.from_ns, window.to_ns, &first, &count);
    str_put(&text, "t_s,");
    str_put_csv(&text, trace->name);
    str_putc(&text, '\n');
    while (count > 0 && !failed && !ferror(stdout)) {
        int64_t step = count < PIECE ? count : PIECE;
        failed = trace_read(trace, first, step, values, err);
        for (int64_t i = 0; i < step && !failed; i++) {
            str_put_seconds(&text, trace_time_ns(trace, first + i));
            str_putc(&text, ',');
            str_put_float(&text, values[i]);
            str_putc(&text, '\n');
        }
        flush_text(&text);
        first += step;
        count -= step;
    }
    flush_text(&text);
    if (!failed && str_failed(&text))
        failed = err_memory(err, trace->name);
    str_free(&text);
    return failed;
}

static int print_train(const struct train *train, struct window window, struct err *err)
{
    struct str text = {0};
    str_put(&text, "t_s,value,flag\n");
    for (size_t i = train_find(train, window.from_ns);
         i < train->count && train->events[i].time_ns < window.to_ns; i++) {
        const struct train_event *event = &train->events[i];
        str_put_seconds(&text, event->time_ns);
        str_putc(&text, ',');
        str_put_float(&text, event->value);
        str_putf(&text, ",%s\n",
                 event->flags & TRAIN_GAP        ? "after-gap"
                 : event->flags & TRAIN_DOUBTFUL ? "doubtful"
                                                 : "");
        if (text.length > 1 << 16)
            flush_text(&text);
    }
    flush_text(&text);
    int failed = str_failed(&text) ? err_memory(err, "printing events") : ERR_OK;
    str_free(&text);
    return failed;
}

static int take_window(const struct arguments *arguments, const struct casefile *casefile,
                       struct window *out, struct err *err)
{
    const char *from = argument(arguments, "from"), *to = argument(arguments, "to");
    *out = (struct window){INT64_MIN / 2, INT64_MAX / 2};
    int failed = from ? casefile_time(casefile, from, &out->from_ns, err) : ERR_OK;
    if (!failed && to)
        failed = casefile_time(casefile, to, &out->to_ns, err);
    if (!failed && out->to_ns <= out->from_ns)
        failed = err_set(err, ERR_USAGE, "--to %s is not after --from %s", to ? to : "the end",
                         from ? from : "the start");
    return failed;
}

static int derive(const struct arguments *arguments, struct casefile *casefile, struct err *err)
{
    struct window window;
    size_t setting_count;
    const char *const *settings = argument_all(arguments, "set", &setting_count);
    const struct derived *derived;
    struct progress progress = {0};
    int failed = take_window(arguments, casefile, &window, err);
    if (failed)
        return failed;
    struct progress_line *line = progress_line_begin("deriving", &progress);
    failed = casefile_derive(casefile, arguments->args[1], argument(arguments, "channel"), settings,
                             setting_count, &progress, &derived, err);
    progress_line_end(line);
    if (failed)
        return failed;
    return derived->trace ? print_trace(derived->trace, window, err)
                          : print_train(&derived->train, window, err);
}

static int run(const struct arguments *arguments)
{
    struct err err = {0};
    struct casefile *casefile = NULL;
    int failed = command_open(arguments, STORE_READ, &casefile, &err);
    if (!failed)
        failed = derive(arguments, casefile, &err);
    casefile_close(casefile);
    return failed ? command_fail(arguments, &err) : EXIT_DONE;
}

const struct command command_derive = {
    .name = "derive",
    .args = "CASE|FILE NAME",
    .least = 2,
    .most = 2,
    .summary = "print a derived trace or event train as CSV",
    .detail = "Works on a case and on a bare recording. A trace prints t_s and its value, empty "
              "where it is not valid; an event train prints t_s, value and a flag (doubtful; "
              "after-gap: the interval before it is not one). t_s counts from the case's start. "
              "`incisura help derivations` lists the names and parameters.",
    .options = options,
    .run = run,
};
