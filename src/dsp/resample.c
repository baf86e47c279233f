/*
 * resample.c - the kernel as a table of rows, one a fraction of a sample, and straight lines
 * between rows (Smith & Gossett 1984, "A flexible sampling-rate conversion method", ICASSP). Each
 * row sums to one, so that a constant stays what it is.
 */
#include "dsp/resample.h"

#include <math.h>
#include <stdbool.h>
#include <stdlib.h>

#include "base/array.h"

#define ZEROS        16    /* zero crossings of the sinc to each side */
#define KAISER_BETA  8.521 /* Kaiser 1974: 86 dB */
#define FINENESS     512.0 /* rows a zero crossing: straight lines between are good to 2e-6 */
#define ON_A_SAMPLE  1e-6  /* nearer than this, in samples, is on it */
#define LEAST_RATE   1e-6
#define MOST_RATE_HZ 1e9

struct resampler {
    double stretch; /* of the kernel: 1 going up, in_rate / out_rate going down */
    int64_t reach;  /* input samples to each side */
    int64_t rows;   /* row r stands for the fraction r / (rows - 1) */
    double *table;  /* shape (rows, 2 * reach) */
};

/* The modified Bessel function of order 0, by its series. */
static double bessel_i0(double x)
{
    double sum = 1, term = 1;
    for (int k = 1; term > sum * 1e-17; k++) {
        term *= (x / (2 * k)) * (x / (2 * k));
        sum += term;
    }
    return sum;
}

/* The kernel `at` zero crossings from its middle, before normalising. */
static double kernel(double at)
{
    double edge = at / ZEROS;
    if (fabs(edge) >= 1)
        return 0;
    double window = bessel_i0(KAISER_BETA * sqrt(1 - edge * edge)) / bessel_i0(KAISER_BETA);
    return fabs(at) < 1e-12 ? window : window * sin(M_PI * at) / (M_PI * at);
}

static void fill_row(const struct resampler *resampler, double *row, double fraction)
{
    double sum = 0;
    for (int64_t tap = 0; tap < 2 * resampler->reach; tap++) {
        double distance = (double)(tap - resampler->reach + 1) - fraction;
        row[tap] = kernel(distance / resampler->stretch);
        sum += row[tap];
    }
    for (int64_t tap = 0; tap < 2 * resampler->reach; tap++)
        row[tap] /= sum;
}

int resampler_new(double in_rate_hz, double out_rate_hz, struct resampler **out, struct err *err)
{
    bool rates = in_rate_hz >= LEAST_RATE && out_rate_hz >= LEAST_RATE &&
                 in_rate_hz <= MOST_RATE_HZ && out_rate_hz <= MOST_RATE_HZ;
    if (!rates || in_rate_hz / out_rate_hz > RESAMPLE_MOST_RATIO)
        return err_set(err, ERR_USAGE,
                       "cannot bring %g Hz to %g Hz: rates are above 0 and go down at most %g-fold",
                       in_rate_hz, out_rate_hz, RESAMPLE_MOST_RATIO);
    double stretch = fmax(1, in_rate_hz / out_rate_hz);
    struct resampler shape = {.stretch = stretch,
                              .reach = (int64_t)ceil(ZEROS * stretch),
                              .rows = (int64_t)ceil(FINENESS / stretch) + 1};
    size_t row_length = 2 * (size_t)shape.reach;
    void *table = NULL, *made = NULL;
    int failed = array_new(&table, (size_t)shape.rows * row_length, sizeof(double), err);
    if (!failed)
        failed = array_new(&made, 1, sizeof(struct resampler), err);
    if (failed) {
        free(table);
        return failed;
    }
    shape.table = table;
    for (int64_t row = 0; row < shape.rows; row++)
        fill_row(&shape, shape.table + (size_t)row * row_length,
                 (double)row / (double)(shape.rows - 1));
    *out = made;
    **out = shape;
    return ERR_OK;
}

void resampler_free(struct resampler *resampler)
{
    if (resampler)
        free(resampler->table);
    free(resampler);
}

int64_t resampler_reach_samples(const struct resampler *resampler)
{
    return resampler->reach;
}

/* Weighted sum of 2 * reach samples; `fraction` (0..1) past the sample input[reach - 1]. A missing
 * one among them makes it NaN by itself. */
static double value_between(const struct resampler *resampler, const float *input, double fraction)
{
    double at = fraction * (double)(resampler->rows - 1);
    int64_t row = (int64_t)at;
    if (row > resampler->rows - 2)
        row = resampler->rows - 2;
    double part = at - (double)row;
    const int64_t taps = 2 * resampler->reach;
    const double *low = resampler->table + row * taps, *high = low + taps;
    double even = 0, odd = 0; /* two sums: the processor adds them side by side */
    for (int64_t tap = 0; tap < taps; tap += 2) {
        even += (low[tap] + part * (high[tap] - low[tap])) * (double)input[tap];
        odd += (low[tap + 1] + part * (high[tap + 1] - low[tap + 1])) * (double)input[tap + 1];
    }
    return even + odd;
}

void resampler_apply(const struct resampler *resampler, const float *input, int64_t in_count,
                     double first_position, double step, float *out, int64_t out_count)
{
    const int64_t reach = resampler->reach;
    const bool through_samples = resampler->stretch == 1;
    for (int64_t k = 0; k < out_count; k++) {
        double position = first_position + (double)k * step, nearest = round(position);
        out[k] = NAN;
        if (!(nearest >= 0 && nearest < (double)in_count))
            continue;
        double below = floor(position);
        int64_t at = (int64_t)below;
        if (through_samples && fabs(position - nearest) < ON_A_SAMPLE)
            out[k] = input[(int64_t)nearest];
        else if (at - reach + 1 >= 0 && at + reach < in_count)
            out[k] = (float)value_between(resampler, input + at - reach + 1, position - below);
    }
}
