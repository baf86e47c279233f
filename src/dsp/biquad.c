/*
 * biquad.c - design by the bilinear transform with prewarping (Oppenheim & Schafer), run in
 * transposed direct form II, which keeps a slow high-pass exact in doubles. No higher orders.
 */
#include "dsp/biquad.h"

#include <math.h>
#include <stdint.h>

static int check_design(const struct filter *filter, size_t more, double at_hz, double rate_hz,
                        struct err *err)
{
    if (!(rate_hz > 0) || !(at_hz > 0) || !(at_hz < rate_hz / 2))
        return err_set(err, ERR_USAGE,
                       "a filter at %g Hz does not fit a signal of %g Hz: choose one between 0 and "
                       "%g Hz",
                       at_hz, rate_hz, rate_hz / 2);
    if (filter->sections + more > FILTER_SECTIONS)
        return err_set(err, ERR_USAGE, "too many filters in a row: at most %d sections",
                       FILTER_SECTIONS);
    return ERR_OK;
}

/* Quality of the conjugate pole pair `pair` of a Butterworth filter. */
static double butterworth_q(int order, int pair)
{
    return 1 / (2 * cos(M_PI * (2 * pair + 1) / (2.0 * order)));
}

static struct biquad butterworth_section(double k, double q, bool high)
{
    double norm = 1 / (1 + k / q + k * k);
    double gain = high ? norm : k * k * norm;
    return (struct biquad){
        .b0 = gain,
        .b1 = high ? -2 * gain : 2 * gain,
        .b2 = gain,
        .a1 = 2 * (k * k - 1) * norm,
        .a2 = (1 - k / q + k * k) * norm,
    };
}

static int add_butterworth(struct filter *filter, int order, double cutoff_hz, double rate_hz,
                           bool high, struct err *err)
{
    if (order != 2 && order != 4)
        return err_set(err, ERR_USAGE, "a filter has order 2 or 4, not %d", order);
    int failed = check_design(filter, (size_t)order / 2, cutoff_hz, rate_hz, err);
    if (failed)
        return failed;
    double k = tan(M_PI * cutoff_hz / rate_hz);
    for (int pair = 0; pair < order / 2; pair++)
        filter->section[filter->sections++] =
            butterworth_section(k, butterworth_q(order, pair), high);
    filter_restart(filter);
    return ERR_OK;
}

int filter_add_lowpass(struct filter *filter, int order, double cutoff_hz, double rate_hz,
                       struct err *err)
{
    return add_butterworth(filter, order, cutoff_hz, rate_hz, false, err);
}

int filter_add_highpass(struct filter *filter, int order, double cutoff_hz, double rate_hz,
                        struct err *err)
{
    return add_butterworth(filter, order, cutoff_hz, rate_hz, true, err);
}

int filter_add_notch(struct filter *filter, double centre_hz, double q, double rate_hz,
                     struct err *err)
{
    int failed = check_design(filter, 1, centre_hz, rate_hz, err);
    if (failed)
        return failed;
    if (!(q > 0))
        return err_set(err, ERR_USAGE, "a notch has a quality above 0, not %g", q);
    double w = 2 * M_PI * centre_hz / rate_hz;
    double gain = 1 / (1 + tan(w / q / 2));
    filter->section[filter->sections++] = (struct biquad){
        .b0 = gain,
        .b1 = -2 * gain * cos(w),
        .b2 = gain,
        .a1 = -2 * gain * cos(w),
        .a2 = 2 * gain - 1,
    };
    filter_restart(filter);
    return ERR_OK;
}

void filter_restart(struct filter *filter)
{
    filter->running = false;
}

/* The state that a constant input `x` since ever leaves behind. */
static void prime(struct filter *filter, double x)
{
    for (size_t i = 0; i < filter->sections; i++) {
        struct biquad *s = &filter->section[i];
        double y = x * (s->b0 + s->b1 + s->b2) / (1 + s->a1 + s->a2);
        s->s2 = s->b2 * x - s->a2 * y;
        s->s1 = s->b1 * x - s->a1 * y + s->s2;
        x = y;
    }
    filter->running = true;
}

static inline double step(struct filter *filter, double x)
{
    for (size_t i = 0; i < filter->sections; i++) {
        struct biquad *s = &filter->section[i];
        double y = s->b0 * x + s->s1;
        s->s1 = s->b1 * x - s->a1 * y + s->s2;
        s->s2 = s->b2 * x - s->a2 * y;
        x = y;
    }
    return x;
}

void filter_run(struct filter *filter, const float *in, float *out, size_t count)
{
    for (size_t i = 0; i < count; i++) {
        if (isnan(in[i])) {
            filter_restart(filter);
            out[i] = NAN;
            continue;
        }
        if (!filter->running)
            prime(filter, (double)in[i]);
        out[i] = (float)step(filter, (double)in[i]);
    }
}

/* One stretch without missing samples, in the direction of `stride`. */
static void run_one_way(struct filter *filter, float *first, ptrdiff_t stride, size_t count)
{
    prime(filter, (double)*first);
    for (size_t i = 0; i < count; i++, first += stride)
        *first = (float)step(filter, (double)*first);
}

void filter_both_ways(struct filter *filter, float *signal, size_t count)
{
    size_t start = 0;
    while (start < count) {
        size_t end = start;
        while (end < count && !isnan(signal[end]))
            end++;
        if (end > start) {
            run_one_way(filter, signal + start, 1, end - start);
            run_one_way(filter, signal + end - 1, -1, end - start);
        }
        start = end + 1;
    }
    filter_restart(filter);
}
