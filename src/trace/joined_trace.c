/*
 * joined_trace.c - sample numbers of several traces laid one after the other. Holds no samples.
 */
#include "trace/joined_trace.h"

#include <math.h>
#include <stdlib.h>

#include "base/array.h"

struct joined_trace {
    struct trace trace;
    const struct trace **parts; /* shape (part_count) */
    int64_t *first;             /* number of each part's first sample, shape (part_count) */
    size_t part_count;
    struct run *runs;
};

static const struct joined_trace *self(const struct trace *trace)
{
    return (const struct joined_trace *)(const void *)trace;
}

static void joined_free(struct trace *trace)
{
    struct joined_trace *joined = (struct joined_trace *)(void *)trace;
    free((void *)joined->parts);
    free(joined->first);
    free(joined->runs);
    free(joined);
}

bool joined_trace_each(const struct trace *trace, int64_t first, int64_t count,
                       bool (*each)(const struct trace *part, int64_t first, int64_t count,
                                    void *context),
                       void *context)
{
    const struct joined_trace *joined = self(trace);
    bool good = true;
    for (size_t i = 0; i < joined->part_count && good; i++) {
        int64_t from = first - joined->first[i], to = from + count;
        from = from > 0 ? from : 0;
        to = to < joined->parts[i]->samples ? to : joined->parts[i]->samples;
        if (from < to)
            good = each(joined->parts[i], from, to - from, context);
    }
    return good;
}

struct reading {
    float *out;
    float low, high;
    int failed;
    struct err *err;
};

static bool read_part(const struct trace *part, int64_t first, int64_t count, void *context)
{
    struct reading *reading = context;
    reading->failed = trace_read(part, first, count, reading->out, reading->err);
    reading->out += count;
    return !reading->failed;
}

static int joined_read(const struct trace *trace, int64_t first, int64_t count, float *out,
                       struct err *err)
{
    struct reading reading = {.out = out, .err = err};
    (void)joined_trace_each(trace, first, count, read_part, &reading);
    return reading.failed;
}

static bool widen_part(const struct trace *part, int64_t first, int64_t count, void *context)
{
    struct reading *reading = context;
    float low = NAN, high = NAN;
    reading->failed = trace_minmax(part, first, count, &low, &high, reading->err);
    reading->low = fminf(reading->low, low);
    reading->high = fmaxf(reading->high, high);
    return !reading->failed;
}

static int joined_minmax(const struct trace *trace, int64_t first, int64_t count, float *low,
                         float *high, struct err *err)
{
    struct reading reading = {.low = NAN, .high = NAN, .err = err};
    (void)joined_trace_each(trace, first, count, widen_part, &reading);
    if (!reading.failed) {
        *low = reading.low;
        *high = reading.high;
    }
    return reading.failed;
}

static const struct trace_ops joined_ops = {joined_read, joined_minmax, joined_free};

bool is_joined_trace(const struct trace *trace)
{
    return trace->ops == &joined_ops;
}

/* Appends a part's runs, numbered on; false when it begins before the last run has. */
static bool append_runs(struct joined_trace *joined, size_t *count, const struct trace *part,
                        int64_t first)
{
    struct run *last = *count > 0 ? &joined->runs[*count - 1] : NULL;
    int64_t start_ns = part->runs[0].start_ns;
    if (last && start_ns <= last->start_ns)
        return false;
    if (last && run_end_ns(last) > start_ns)
        last->span_ns = start_ns - last->start_ns;
    for (size_t i = 0; i < part->run_count; i++) {
        struct run run = part->runs[i];
        run.first += first;
        joined->runs[(*count)++] = run;
    }
    return true;
}

static int lay_out(struct joined_trace *joined, const struct trace *const *parts, struct err *err)
{
    void *list = NULL, *first = NULL, *runs = NULL;
    size_t run_count = 0, count = 0;
    int64_t samples = 0;
    for (size_t i = 0; i < joined->part_count; i++)
        run_count += parts[i]->run_count;
    int failed = array_new(&list, joined->part_count, sizeof *joined->parts, err);
    joined->parts = list;
    if (!failed)
        failed = array_new(&first, joined->part_count, sizeof *joined->first, err);
    joined->first = first;
    if (!failed)
        failed = array_new(&runs, run_count, sizeof *joined->runs, err);
    joined->runs = runs;
    for (size_t i = 0; i < joined->part_count && !failed; i++) {
        joined->parts[i] = parts[i];
        joined->first[i] = samples;
        if (parts[i]->run_count == 0 || !append_runs(joined, &count, parts[i], samples))
            failed = err_set(err, ERR_CONFLICT, "the parts of %s do not follow one another",
                             parts[0]->name);
        samples += parts[i]->samples;
    }
    joined->trace.samples = samples;
    joined->trace.run_count = count;
    return failed;
}

int joined_trace_new(const struct trace *const *parts, size_t count, struct trace **out,
                     struct err *err)
{
    struct joined_trace *made = calloc(1, sizeof *made);
    if (!made)
        return err_memory(err, parts[0]->name);
    made->part_count = count;
    int failed = lay_out(made, parts, err);
    if (failed) {
        joined_free(&made->trace);
        return failed;
    }
    made->trace.ops = &joined_ops;
    made->trace.name = parts[0]->name;
    made->trace.unit = parts[0]->unit;
    made->trace.role = parts[0]->role;
    made->trace.rate_hz = parts[0]->rate_hz;
    made->trace.runs = made->runs;
    made->trace.reach_ns = parts[0]->reach_ns;
    *out = &made->trace;
    return ERR_OK;
}
