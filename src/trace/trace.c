/*
 * trace.c - what all traces share: range checks, time by sample and sample by time, extremes by
 * reading, and the trace that holds its samples in memory. Knows no kind of signal.
 */
#include "trace/trace.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "dsp/stats.h"

enum { SCAN_STEP = 4096 };

static int check_range(const struct trace *trace, int64_t first, int64_t count, struct err *err)
{
    if (first < 0 || count < 0 || first > trace->samples || count > trace->samples - first)
        return err_set(err, ERR_USAGE, "%s: samples %lld..%lld do not exist; it has %lld",
                       trace->name, (long long)first, (long long)(first + count),
                       (long long)trace->samples);
    return ERR_OK;
}

int trace_read(const struct trace *trace, int64_t first, int64_t count, float *out, struct err *err)
{
    int failed = check_range(trace, first, count, err);
    if (failed || count == 0)
        return failed;
    return trace->ops->read(trace, first, count, out, err);
}

/* Extremes through read(), a fixed piece at a time: no allocation. */
static int scan_minmax(const struct trace *trace, int64_t first, int64_t count, float *low,
                       float *high, struct err *err)
{
    float least = INFINITY, greatest = -INFINITY;
    while (count > 0) {
        float piece[SCAN_STEP];
        int64_t step = count < SCAN_STEP ? count : SCAN_STEP;
        int failed = trace->ops->read(trace, first, step, piece, err);
        if (failed)
            return failed;
        widen_extremes(piece, step, &least, &greatest);
        first += step;
        count -= step;
    }
    bool none = least > greatest;
    *low = none ? NAN : least;
    *high = none ? NAN : greatest;
    return ERR_OK;
}

int trace_minmax(const struct trace *trace, int64_t first, int64_t count, float *low, float *high,
                 struct err *err)
{
    int failed = check_range(trace, first, count, err);
    if (failed)
        return failed;
    if (count == 0) {
        *low = *high = NAN;
        return ERR_OK;
    }
    if (trace->ops->minmax)
        return trace->ops->minmax(trace, first, count, low, high, err);
    return scan_minmax(trace, first, count, low, high, err);
}

void trace_free(struct trace *trace)
{
    if (trace)
        trace->ops->free(trace);
}

void trace_extent(const struct trace *trace, int64_t *from_ns, int64_t *to_ns)
{
    *from_ns = *to_ns = 0;
    if (trace->times_ns && trace->samples > 0) {
        *from_ns = trace->times_ns[0];
        *to_ns = trace->times_ns[trace->samples - 1] + 1;
    } else if (trace->run_count > 0) {
        *from_ns = trace->runs[0].start_ns;
        *to_ns = run_end_ns(&trace->runs[trace->run_count - 1]);
    }
}

/* Number of the first sample at or after at_ns; `samples` when there is none. */
static int64_t sample_at(const struct trace *trace, int64_t at_ns)
{
    if (trace->times_ns) {
        int64_t low = 0, high = trace->samples;
        while (low < high) {
            int64_t middle = low + (high - low) / 2;
            if (trace->times_ns[middle] >= at_ns)
                high = middle;
            else
                low = middle + 1;
        }
        return low;
    }
    size_t at = run_find(trace->runs, trace->run_count, at_ns);
    return at == trace->run_count ? trace->samples : run_sample_at(&trace->runs[at], at_ns);
}

void trace_range(const struct trace *trace, int64_t from_ns, int64_t to_ns, int64_t *first,
                 int64_t *count)
{
    *first = sample_at(trace, from_ns);
    *count = to_ns > from_ns ? sample_at(trace, to_ns) - *first : 0;
}

int64_t trace_time_ns(const struct trace *trace, int64_t sample)
{
    if (trace->times_ns)
        return trace->times_ns[sample];
    size_t at = run_of_sample(trace->runs, trace->run_count, sample);
    return at == trace->run_count ? NS_NONE : run_time_ns(&trace->runs[at], sample);
}

/* The run sample nearest to at_ns, at most half a period away; -1 when none is. */
static int64_t nearest_sample(const struct trace *trace, int64_t at_ns)
{
    int64_t after = sample_at(trace, at_ns), best = -1, distance = INT64_MAX;
    for (int64_t k = after - 1; k <= after; k++) {
        size_t at = run_of_sample(trace->runs, trace->run_count, k);
        if (k < 0 || at == trace->run_count)
            continue;
        const struct run *run = &trace->runs[at];
        int64_t away = llabs(run_time_ns(run, k) - at_ns);
        if (away < distance && away <= run->span_ns / run->count / 2 + 1) {
            best = k;
            distance = away;
        }
    }
    return best;
}

int trace_value_at(const struct trace *trace, int64_t at_ns, float *out, int64_t *age_ns,
                   struct err *err)
{
    int64_t sample;
    *out = NAN;
    *age_ns = 0;
    if (trace->times_ns) {
        sample = sample_at(trace, at_ns);
        if (sample == trace->samples || trace->times_ns[sample] > at_ns)
            sample--;
        if (sample >= 0)
            *age_ns = at_ns - trace->times_ns[sample];
    } else {
        sample = nearest_sample(trace, at_ns);
    }
    return sample < 0 ? ERR_OK : trace_read(trace, sample, 1, out, err);
}

struct memory_trace {
    struct trace trace;
    char *name, *unit;
    struct run *runs;
    float *values;
};

static int memory_read(const struct trace *trace, int64_t first, int64_t count, float *out,
                       struct err *err)
{
    (void)err;
    const struct memory_trace *memory = (const struct memory_trace *)(const void *)trace;
    memcpy(out, memory->values + first, (size_t)count * sizeof *out);
    return ERR_OK;
}

static void memory_free(struct trace *trace)
{
    struct memory_trace *memory = (struct memory_trace *)(void *)trace;
    free(memory->name);
    free(memory->unit);
    free(memory->runs);
    free(memory->values);
    free(memory);
}

static const struct trace_ops memory_ops = {memory_read, NULL, memory_free};

int memory_trace_new(const char *name, const char *unit, const struct run *runs, size_t run_count,
                     float *samples, int64_t reach_ns, struct trace **out, struct err *err)
{
    void *own = NULL, *made = NULL;
    int failed = array_new(&own, run_count, sizeof *runs, err);
    if (!failed)
        failed = array_new_zero(&made, 1, sizeof(struct memory_trace), err);
    if (failed) {
        free(own);
        return failed;
    }
    struct memory_trace *memory = made;
    if (run_count > 0)
        memcpy(own, runs, run_count * sizeof *runs);
    memory->runs = own;
    memory->name = strdup(name);
    memory->unit = strdup(unit);
    if (!memory->name || !memory->unit) {
        memory_free(&memory->trace);
        return err_memory(err, name);
    }
    memory->values = samples;
    const struct run *last = run_count > 0 ? &memory->runs[run_count - 1] : NULL;
    memory->trace = (struct trace){
        .ops = &memory_ops,
        .name = memory->name,
        .unit = memory->unit,
        .rate_hz = run_count > 0 ? run_rate_hz(&memory->runs[0]) : 0,
        .samples = last ? last->first + last->count : 0,
        .runs = memory->runs,
        .run_count = run_count,
        .reach_ns = reach_ns,
    };
    *out = &memory->trace;
    return ERR_OK;
}
