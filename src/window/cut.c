/*
 * cut.c - filling windows from traces. Selects nothing and writes nothing.
 */
#include "window/cut.h"

#include <math.h>
#include <stdlib.h>

#include "base/array.h"
#include "base/ns.h"
#include "dsp/resample.h"

/* A trace this slow (heart rate, trends) that is not thinned out is drawn straight between
 * neighbours: the resampler's kernel would reach 16 samples, which here are seconds, to each side,
 * and one gap would take them all. */
static const double slow_hz = 10;

struct cutter {
    double rate_hz;
    int64_t age_ns;
    struct resampler *resampler; /* for the rate of the last run */
    double in_rate_hz;
    float *input;
    size_t input_room;
};

int cutter_new(double rate_hz, int64_t age_ns, struct cutter **out, struct err *err)
{
    struct cutter *made = calloc(1, sizeof *made);
    if (!made)
        return err_memory(err, "cutting windows");
    made->rate_hz = rate_hz;
    made->age_ns = age_ns;
    *out = made;
    return ERR_OK;
}

void cutter_free(struct cutter *cutter)
{
    if (!cutter)
        return;
    resampler_free(cutter->resampler);
    free(cutter->input);
    free(cutter);
}

static int64_t grid_ns(const struct cutter *cutter, int64_t start_ns, int64_t k)
{
    return start_ns + (int64_t)llround((double)k * 1e9 / cutter->rate_hz);
}

/* First k of the grid that is not before at_ns, clamped to [0, count]. */
static int64_t grid_from(const struct cutter *cutter, int64_t start_ns, int64_t count,
                         int64_t at_ns)
{
    double k = ceil((double)(at_ns - start_ns) * cutter->rate_hz / 1e9 - 1e-6);
    return k <= 0 ? 0 : k >= (double)count ? count : (int64_t)k;
}

static int use_rate(struct cutter *cutter, double in_rate_hz, struct err *err)
{
    if (cutter->resampler && cutter->in_rate_hz == in_rate_hz)
        return ERR_OK;
    struct resampler *made = NULL;
    int failed = resampler_new(in_rate_hz, cutter->rate_hz, &made, err);
    if (failed)
        return failed;
    resampler_free(cutter->resampler);
    cutter->resampler = made;
    cutter->in_rate_hz = in_rate_hz;
    return ERR_OK;
}

/* Grid points [first, end) on straight lines between the run's samples; NaN next to one. */
static int cut_slow(const struct trace *trace, const struct run *run, double position, double step,
                    int64_t first, int64_t end, float *out, struct err *err)
{
    for (int64_t k = first; k < end; k++, position += step) {
        float pair[2] = {NAN, NAN};
        int64_t before = (int64_t)floor(position + 1e-6);
        double share = position - (double)before;
        bool on_sample = share < 1e-6;
        if (before < 0 || before + (on_sample ? 1 : 2) > run->count)
            continue;
        int failed = trace_read(trace, run->first + before, on_sample ? 1 : 2, pair, err);
        if (failed)
            return failed;
        double rise = (double)pair[1] - (double)pair[0];
        out[k] = on_sample ? pair[0] : (float)((double)pair[0] + share * rise);
    }
    return ERR_OK;
}

/* The part of the window that lies in one run: grid points [first, end). */
static int cut_run(struct cutter *cutter, const struct trace *trace, const struct run *run,
                   int64_t start_ns, int64_t first, int64_t end, float *out, struct err *err)
{
    double rate_hz = run_rate_hz(run), step = rate_hz / cutter->rate_hz;
    double position = (double)(start_ns - run->start_ns) / 1e9 * rate_hz + (double)first * step;
    if (rate_hz <= slow_hz && step <= 1 + 1e-9)
        return cut_slow(trace, run, position, step, first, end, out, err);
    int failed = use_rate(cutter, rate_hz, err);
    if (failed)
        return failed;
    int64_t reach = resampler_reach_samples(cutter->resampler) + 1;
    int64_t from = (int64_t)floor(position) - reach;
    int64_t to = (int64_t)ceil(position + (double)(end - first) * step) + reach;
    from = from > 0 ? from : 0;
    to = to < run->count ? to : run->count;
    if (to <= from)
        return ERR_OK;
    failed = array_reserve((void **)&cutter->input, &cutter->input_room, (size_t)(to - from),
                           sizeof *cutter->input, err);
    if (!failed)
        failed = trace_read(trace, run->first + from, to - from, cutter->input, err);
    if (!failed)
        resampler_apply(cutter->resampler, cutter->input, to - from, position - (double)from, step,
                        out + first, end - first);
    return failed;
}

static int cut_steps(struct cutter *cutter, const struct trace *trace, int64_t start_ns,
                     int64_t count, float *out, struct err *err)
{
    for (int64_t k = 0; k < count; k++) {
        int64_t age_ns;
        int failed = trace_value_at(trace, grid_ns(cutter, start_ns, k), &out[k], &age_ns, err);
        if (failed)
            return failed;
        if (age_ns > cutter->age_ns)
            out[k] = NAN;
    }
    return ERR_OK;
}

int cutter_cut(struct cutter *cutter, const struct trace *trace, int64_t start_ns, int64_t count,
               float *out, struct err *err)
{
    for (int64_t k = 0; k < count; k++)
        out[k] = NAN;
    if (trace->times_ns)
        return cut_steps(cutter, trace, start_ns, count, out, err);
    int64_t last_ns = grid_ns(cutter, start_ns, count - 1);
    int failed = ERR_OK;
    for (size_t i = run_find(trace->runs, trace->run_count, start_ns);
         i < trace->run_count && trace->runs[i].start_ns <= last_ns && !failed; i++) {
        const struct run *run = &trace->runs[i];
        int64_t first = grid_from(cutter, start_ns, count, run->start_ns);
        int64_t end = grid_from(cutter, start_ns, count, run_end_ns(run));
        if (first < end)
            failed = cut_run(cutter, trace, run, start_ns, first, end, out, err);
    }
    return failed;
}
