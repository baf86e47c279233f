/*
 * r_peak.c - the extreme of the lightly filtered signal, and the parabola through it. Finds no
 * beats: it is told about where one is.
 */
#include "physiology/r_peak.h"

#include <math.h>
#include <stdlib.h>

#include "base/array.h"
#include "dsp/biquad.h"
#include "dsp/stats.h"

#define SMOOTH_HZ 40.0 /* common practice for a monitor's ECG */
#define MEMORY    0.125
#define OVERRULES 1.6 /* how much higher the other side must be for a beat that points that way */

int r_peak_init(struct r_peak *finder, const struct trace *trace, struct err *err)
{
    double reach_s = (double)(R_PEAK_REACH_NS + R_PEAK_MARGIN_NS) / 1e9;
    int64_t room = (int64_t)(2 * reach_s * trace->rate_hz * 1.5) + 8;
    void *samples = NULL, *scratch = NULL;
    int failed = array_new(&samples, (size_t)room, sizeof(float), err);
    if (!failed)
        failed = array_new(&scratch, (size_t)room, sizeof(double), err);
    *finder = (struct r_peak){.trace = trace, .samples = samples, .scratch = scratch, .room = room};
    if (failed)
        r_peak_fini(finder);
    return failed;
}

void r_peak_fini(struct r_peak *finder)
{
    free(finder->samples);
    free(finder->scratch);
    finder->samples = NULL;
    finder->scratch = NULL;
}

/* Smooths samples, shape (count), and takes the baseline, their median, off: *base. */
static int prepare(struct r_peak *finder, int64_t count, float *base, struct err *err)
{
    struct filter smooth = {0};
    double rate_hz = finder->trace->rate_hz;
    int failed = filter_add_lowpass(&smooth, 2, fmin(SMOOTH_HZ, 0.4 * rate_hz), rate_hz, err);
    if (failed)
        return failed;
    filter_both_ways(&smooth, finder->samples, (size_t)count);
    size_t there = 0;
    for (int64_t i = 0; i < count; i++) {
        if (!isnan(finder->samples[i]))
            finder->scratch[there++] = (double)finder->samples[i];
    }
    *base = (float)median(finder->scratch, there);
    for (int64_t i = 0; i < count; i++)
        finder->samples[i] -= *base;
    return ERR_OK;
}

/* Index of the extreme of samples [from, to) in the direction of `sign`; -1 when all are missing.
 */
static int64_t extreme(const struct r_peak *finder, int64_t from, int64_t to, float sign)
{
    int64_t best = -1;
    for (int64_t i = from; i < to; i++) {
        float value = sign * finder->samples[i];
        if (!isnan(value) && (best < 0 || value > sign * finder->samples[best]))
            best = i;
    }
    return best;
}

static void learn(double *level, double height)
{
    height = fmax(height, 0);
    *level = *level > 0 ? *level + MEMORY * (fmin(height, 3 * *level) - *level) : height;
}

/* The extreme that is this lead's R peak: the side that its beats usually point to, unless this
 * one clearly points the other way. */
static int64_t choose_side(struct r_peak *finder, int64_t from, int64_t to)
{
    int64_t top = extreme(finder, from, to, 1), bottom = extreme(finder, from, to, -1);
    if (top < 0)
        return -1;
    double up = (double)finder->samples[top], down = -(double)finder->samples[bottom];
    learn(&finder->up, up);
    learn(&finder->down, down);
    bool upward = finder->up >= finder->down;
    if (upward ? down > OVERRULES * up : up > OVERRULES * down)
        upward = !upward;
    return upward ? top : bottom;
}

/* Vertex of the parabola through three samples, in samples from the middle one; 0 at an edge. */
static double vertex(const struct r_peak *finder, int64_t at, int64_t count)
{
    if (at == 0 || at + 1 >= count)
        return 0;
    double a = (double)finder->samples[at - 1], b = (double)finder->samples[at],
           c = (double)finder->samples[at + 1];
    double curve = a - 2 * b + c, shift = (a - c) / (2 * curve);
    return isfinite(shift) && fabs(shift) <= 0.5 ? shift : 0;
}

int r_peak_find(struct r_peak *finder, int64_t about_ns, int64_t *at_ns, float *height, bool *found,
                struct err *err)
{
    const int64_t wide = R_PEAK_REACH_NS + R_PEAK_MARGIN_NS;
    int64_t first, count, near, near_count;
    trace_range(finder->trace, about_ns - wide, about_ns + wide, &first, &count);
    trace_range(finder->trace, about_ns - R_PEAK_REACH_NS, about_ns + R_PEAK_REACH_NS + 1, &near,
                &near_count);
    *found = false;
    if (near_count == 0 || count > finder->room)
        return ERR_OK;
    float base = 0, raw = 0;
    int failed = trace_read(finder->trace, first, count, finder->samples, err);
    if (!failed)
        failed = prepare(finder, count, &base, err);
    if (failed)
        return failed;
    int64_t at = choose_side(finder, near - first, near - first + near_count);
    if (at < 0)
        return ERR_OK;
    double period_ns = 1e9 / finder->trace->rate_hz;
    *at_ns =
        trace_time_ns(finder->trace, first + at) + llround(vertex(finder, at, count) * period_ns);
    /* Smoothing took some of the height: the sample itself tells it. */
    failed = trace_read(finder->trace, first + at, 1, &raw, err);
    *height = raw - base;
    *found = !failed;
    return failed;
}
