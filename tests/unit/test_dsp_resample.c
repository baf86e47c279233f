/*
 * test_dsp_resample.c - changing the rate against what sines must become, and scipy.
 */
#include <criterion/criterion.h>

#include <math.h>
#include <stdlib.h>

#include "dsp/resample.h"

enum { LENGTH = 8000 };

static float input[LENGTH];

static void fill_sine(double hz, double rate_hz)
{
    for (int i = 0; i < LENGTH; i++)
        input[i] = (float)sin(2 * M_PI * hz * i / rate_hz + 0.3);
}

static struct resampler *make(double in_hz, double out_hz)
{
    struct resampler *resampler = NULL;
    struct err err = {0};
    cr_assert_eq(resampler_new(in_hz, out_hz, &resampler, &err), 0, "%s", err.text);
    return resampler;
}

/* Greatest distance of the output from `amplitude` times the sine, over the outputs that are
 * there; *count says how many are. */
static double worst(double in_hz, double out_hz, double hz, double offset, double amplitude,
                    int *count)
{
    static float out[40 * LENGTH];
    struct resampler *resampler = make(in_hz, out_hz);
    double step = in_hz / out_hz, off = 0;
    int64_t wanted = (int64_t)(LENGTH / step);
    cr_assert_leq(wanted, 40 * LENGTH);
    fill_sine(hz, in_hz);
    resampler_apply(resampler, input, LENGTH, offset, step, out, wanted);
    *count = 0;
    for (int64_t k = 0; k < wanted; k++) {
        if (isnan(out[k]))
            continue;
        double truth = sin(2 * M_PI * hz * (offset + (double)k * step) / in_hz + 0.3);
        off = fmax(off, fabs((double)out[k] - amplitude * truth));
        ++*count;
    }
    resampler_free(resampler);
    return off;
}

Test(dsp_resample, sines_of_the_pass_band_stay_what_they_are)
{
    static const struct {
        double in_hz, out_hz, hz, offset;
    } rows[] = {{500, 200, 80, 0},      {500, 200, 3, 0.37},      {1000, 100, 40, 12.5},
                {360, 250, 100, 0.001}, {250, 1000, 100, 0},      {100, 333.333, 40, 7.7},
                {500, 499.99, 200, 0},  {512, 512, 204, 0.5},     {1000, 10, 4, 3},
                {125, 4000, 50, 0.25},  {499.7, 100.03, 40, 0.9}, {1000, 999, 0.05, 0.1}};
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        int count;
        double off = worst(rows[i].in_hz, rows[i].out_hz, rows[i].hz, rows[i].offset, 1, &count);
        cr_expect_lt(off, 1e-4, "row %zu: %g", i, off);
        cr_expect_gt(count, 40, "row %zu", i);
    }
}

Test(dsp_resample, what_would_alias_is_74_dB_down)
{
    static const struct {
        double in_hz, out_hz, hz;
    } rows[] = {{500, 200, 120},  {500, 200, 199}, {1000, 100, 60}, {1000, 100, 433},
                {1000, 100, 100}, {360, 100, 61},  {1000, 10, 7},   {500, 333.3, 200}};
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        int count;
        double off = worst(rows[i].in_hz, rows[i].out_hz, rows[i].hz, 0.21, 0, &count);
        cr_expect_lt(off, 2e-4, "row %zu: %g", i, off);
        cr_expect_gt(count, 40);
    }
}

Test(dsp_resample, a_constant_stays_to_the_last_digit)
{
    static const double rates[][2] = {{500, 200}, {200, 500}, {1000, 7.3}, {360, 359}};
    for (size_t r = 0; r < 4; r++) {
        struct resampler *resampler = make(rates[r][0], rates[r][1]);
        float out[50];
        for (int i = 0; i < LENGTH; i++)
            input[i] = 1234.5f;
        resampler_apply(resampler, input, LENGTH, 3000.123, 0.37, out, 50);
        for (int k = 0; k < 50; k++)
            cr_expect_float_eq(out[k], 1234.5, 1234.5e-6);
        resampler_free(resampler);
    }
}

/* x = 0.5 sin(2 pi 7 t) + 0.3 cos(2 pi 31 t + 1), t = n / 500, n = 0..7999;
 * scipy.signal.resample_poly(x, 2, 5)[1000:1008]. Its own filter is flat to 1e-3. */
Test(dsp_resample, agrees_with_the_polyphase_filter_of_scipy)
{
    static const double expected[8] = {0.162277942, -0.008640584, -0.081616037, 0.093262337,
                                       0.440363077, 0.721045641,  0.739229276,  0.511338995};
    struct resampler *resampler = make(500, 200);
    float out[8];
    for (int i = 0; i < LENGTH; i++)
        input[i] =
            (float)(0.5 * sin(2 * M_PI * 7 * i / 500.0) + 0.3 * cos(2 * M_PI * 31 * i / 500.0 + 1));
    resampler_apply(resampler, input, LENGTH, 2500, 2.5, out, 8);
    for (int k = 0; k < 8; k++)
        cr_expect_float_eq(out[k], expected[k], 1e-3, "%d: %.6f", k, (double)out[k]);
    resampler_free(resampler);
}

/* Reading the same positions out of another piece of the same input gives the same numbers. */
Test(dsp_resample, a_window_of_the_input_gives_the_same)
{
    struct resampler *resampler = make(500, 120);
    int64_t reach = resampler_reach_samples(resampler);
    float whole[20], part[20];
    for (int i = 0; i < LENGTH; i++)
        input[i] = (float)(sin(i * 0.05) + 0.2 * sin(i * 0.31));
    resampler_apply(resampler, input, LENGTH, 4000.25, 500.0 / 120, whole, 20);
    int64_t from = 4000 - reach, last = (int64_t)(4000.25 + 19 * 500.0 / 120) + reach;
    resampler_apply(resampler, input + from, last - from + 1, 4000.25 - (double)from, 500.0 / 120,
                    part, 20);
    for (int k = 0; k < 20; k++)
        cr_expect_float_eq(whole[k], part[k], 1e-6);
    resampler_free(resampler);
}

Test(dsp_resample, nothing_is_made_up_next_to_a_gap)
{
    static const double outs[] = {200, 500, 1300};
    for (size_t r = 0; r < 3; r++) {
        struct resampler *resampler = make(500, outs[r]);
        double reach = (double)resampler_reach_samples(resampler);
        float out[800];
        fill_sine(11, 500);
        input[300] = NAN;
        resampler_apply(resampler, input, 600, 0.5, 0.75, out, 800);
        for (int k = 0; k < 800; k++) {
            double position = 0.5 + 0.75 * k;
            bool on_sample = outs[r] >= 500 && position == floor(position) && position != 300;
            bool far = fabs(position - 300) > reach && position > reach && position < 599 - reach;
            bool near =
                fabs(position - 300) < reach - 1 || position < reach - 2 || position > 600 - reach;
            if (far || (on_sample && position < 600))
                cr_expect_not(isnan(out[k]), "to %g Hz, at %g", outs[r], position);
            else if (near)
                cr_expect(isnan(out[k]), "to %g Hz, at %g: %g", outs[r], position, (double)out[k]);
        }
        resampler_free(resampler);
    }
}

Test(dsp_resample, same_grid_copies_and_positions_may_lie_outside)
{
    struct resampler *resampler = make(250, 250);
    fill_sine(17, 250);
    float out[20];
    resampler_apply(resampler, input, 10, -5, 1, out, 20);
    for (int k = 0; k < 20; k++) {
        if (k >= 5 && k < 15)
            cr_expect_eq(out[k], input[k - 5]);
        else
            cr_expect(isnan(out[k]));
    }
    resampler_apply(resampler, input, 0, 0, 1, out, 2);
    cr_expect(isnan(out[0]));
    resampler_apply(resampler, input, 10, (double)NAN, 1, out, 2);
    cr_expect(isnan(out[0]));
    resampler_apply(resampler, input, 10, 1e300, 1, out, 2);
    cr_expect(isnan(out[0]));
    resampler_free(resampler);
}

Test(dsp_resample, rates_that_cannot_be_are_refused)
{
    static const double rates[][2] = {{0, 100}, {100, 0},         {-1, 5},
                                      {1e6, 1}, {(double)NAN, 1}, {1, (double)INFINITY}};
    for (size_t i = 0; i < sizeof rates / sizeof *rates; i++) {
        struct resampler *resampler = NULL;
        struct err err = {0};
        cr_expect_eq(resampler_new(rates[i][0], rates[i][1], &resampler, &err), ERR_USAGE);
        cr_expect_null(resampler);
    }
}
