/*
 * test_filter.c - filter design and filtering against scipy 1.10, whose numbers stand here with
 * the calls that gave them.
 */
#include <criterion/criterion.h>

#include <math.h>
#include <string.h>

#include "dsp/biquad.h"

/* Multiplies out the sections: b and a of the whole, shape (5) each. */
static void multiply_out(const struct filter *filter, double *b, double *a)
{
    memset(b, 0, 5 * sizeof *b);
    memset(a, 0, 5 * sizeof *a);
    b[0] = a[0] = 1;
    for (size_t s = 0; s < filter->sections; s++) {
        const struct biquad *q = &filter->section[s];
        for (int i = 4; i >= 0; i--) {
            b[i] = q->b0 * b[i] + (i > 0 ? q->b1 * b[i - 1] : 0) + (i > 1 ? q->b2 * b[i - 2] : 0);
            a[i] = a[i] + (i > 0 ? q->a1 * a[i - 1] : 0) + (i > 1 ? q->a2 * a[i - 2] : 0);
        }
    }
}

/* scipy.signal.butter(order, cutoff, 'high' or 'low', fs=rate) */
Test(filter, butterworth_coefficients_are_those_of_scipy)
{
    static const struct {
        bool high;
        int order;
        double cutoff_hz, rate_hz, b[5], a[5];
    } rows[] = {
        {false,
         2,
         40,
         500,
         {0.0461318020933, 0.0922636041866, 0.0461318020933},
         {1, -1.30728502885, 0.491812237223}},
        {false,
         4,
         15,
         360,
         {0.000213138726975, 0.0008525549079, 0.00127883236185, 0.0008525549079, 0.000213138726975},
         {1, -3.31680791062, 4.17424555008, -2.35740278056, 0.503375360742}},
        {true,
         2,
         0.5,
         250,
         {0.991153595102, -1.9823071902, 0.991153595102},
         {1, -1.98222892979, 0.982385450614}},
        {true,
         4,
         5,
         1000,
         {0.959782230087, -3.83912892035, 5.75869338052, -3.83912892035, 0.959782230087},
         {1, -3.91790786539, 5.75707637912, -3.76034950769, 0.921181929191}},
        {true,
         2,
         0.05,
         1000,
         {0.999777880525, -1.99955576105, 0.999777880525},
         {1, -1.99955571171, 0.999555810388}},
        {false,
         2,
         99,
         200,
         {0.978030479207, 1.95606095841, 0.978030479207},
         {1, 1.95557824032, 0.956543676511}},
    };
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        struct filter filter = {0};
        struct err err = {0};
        int failed = (rows[i].high ? filter_add_highpass : filter_add_lowpass)(
            &filter, rows[i].order, rows[i].cutoff_hz, rows[i].rate_hz, &err);
        cr_assert_eq(failed, 0, "%s", err.text);
        double b[5], a[5];
        multiply_out(&filter, b, a);
        for (int k = 0; k < 5; k++) {
            cr_expect_float_eq(b[k], rows[i].b[k], 1e-9, "row %zu b[%d] = %.12g", i, k, b[k]);
            cr_expect_float_eq(a[k], rows[i].a[k], 1e-9, "row %zu a[%d] = %.12g", i, k, a[k]);
        }
    }
}

/* scipy.signal.iirnotch(centre, q, rate) */
Test(filter, notch_coefficients_are_those_of_scipy)
{
    static const struct {
        double centre_hz, q, rate_hz, b[3], a[3];
    } rows[] = {
        {50,
         30,
         500,
         {0.989636175363, -1.60126496823, 0.989636175363},
         {1, -1.60126496823, 0.979272350726}},
        {60,
         30,
         360,
         {0.982844387404, -0.982844387404, 0.982844387404},
         {1, -0.982844387404, 0.965688774807}},
        {50,
         5,
         1000,
         {0.969531252909, -1.84415803166, 0.969531252909},
         {1, -1.84415803166, 0.939062505817}},
    };
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        struct filter filter = {0};
        struct err err = {0};
        cr_assert_eq(filter_add_notch(&filter, rows[i].centre_hz, rows[i].q, rows[i].rate_hz, &err),
                     0);
        double b[5], a[5];
        multiply_out(&filter, b, a);
        for (int k = 0; k < 3; k++) {
            cr_expect_float_eq(b[k], rows[i].b[k], 1e-9);
            cr_expect_float_eq(a[k], rows[i].a[k], 1e-9);
        }
    }
}

static const float wave[12] = {0.3f, 1, -0.5f, 2, 0, 0.25f, -1, 0.75f, 1.5f, -2, 0.5f, 0.125f};

/* sos = butter(2, 40, 'low', fs=500, output='sos'); sosfilt(sos, x, zi=sosfilt_zi(sos) * x[0]) */
Test(filter, causal_run_is_that_of_scipy_in_any_pieces)
{
    static const double expected[12] = {
        0.3,
        0.332292261465319,
        0.3698942712172872,
        0.4123954466831092,
        0.5186611716778653,
        0.579013412236253,
        0.47878575306938564,
        0.2950117632668551,
        0.2424553732724763,
        0.25259853800723153,
        0.11871216330368368,
        -0.0094057450989153,
    };
    for (size_t piece = 1; piece <= 12; piece++) {
        struct filter filter = {0};
        struct err err = {0};
        cr_assert_eq(filter_add_lowpass(&filter, 2, 40, 500, &err), 0);
        float out[12];
        for (size_t at = 0; at < 12; at += piece)
            filter_run(&filter, wave + at, out + at, at + piece < 12 ? piece : 12 - at);
        for (size_t i = 0; i < 12; i++)
            cr_expect_float_eq(out[i], expected[i], 1e-6, "piece %zu, %zu: %.9g", piece, i,
                               (double)out[i]);
    }
}

/* sosfiltfilt(sos, x, padlen=0), the same filter */
Test(filter, both_ways_is_that_of_scipy)
{
    static const double expected[12] = {
        0.440760029431375,  0.46576425179360575,  0.4670248077560935,     0.43360420085435447,
        0.3636738027885764, 0.27532894261525814,  0.19457728595373278,    0.12918321483267475,
        0.0707444744167994, 0.022228064399385114, -0.0034954351038774143, -0.0094057450989153,
    };
    struct filter filter = {0};
    struct err err = {0};
    cr_assert_eq(filter_add_lowpass(&filter, 2, 40, 500, &err), 0);
    float twice[26];
    memcpy(twice, wave, sizeof wave);
    twice[12] = twice[13] = NAN;
    memcpy(twice + 14, wave, sizeof wave);
    filter_both_ways(&filter, twice, 26);
    for (size_t i = 0; i < 12; i++) {
        cr_expect_float_eq(twice[i], expected[i], 1e-6, "%zu: %.9g", i, (double)twice[i]);
        cr_expect_eq(twice[i], twice[i + 14], "after a gap as at the start");
    }
    cr_expect(isnan(twice[12]) && isnan(twice[13]));
}

/* A missing sample stays one, and what follows starts afresh. */
Test(filter, missing_samples_restart_it)
{
    struct filter filter = {0};
    struct err err = {0};
    cr_assert_eq(filter_add_highpass(&filter, 4, 0.5, 250, &err), 0);
    float signal[40], out[40];
    for (int i = 0; i < 40; i++)
        signal[i] = i < 20 ? 5000 : -300;
    signal[20] = NAN;
    filter_run(&filter, signal, out, 40);
    for (int i = 0; i < 40; i++) {
        if (i == 20)
            cr_expect(isnan(out[i]));
        else
            cr_expect_float_eq(out[i], 0, 1e-6, "an offset does not ring: [%d] %g", i,
                               (double)out[i]);
    }
}

Test(filter, designs_that_cannot_be_are_refused)
{
    struct filter filter = {0};
    struct err err = {0};
    cr_expect_eq(filter_add_lowpass(&filter, 2, 125, 250, &err), ERR_USAGE);
    cr_expect_str_eq(
        err.text,
        "a filter at 125 Hz does not fit a signal of 250 Hz: choose one between 0 and 125 Hz");
    cr_expect_eq(filter_add_highpass(&filter, 2, 0, 250, &err), ERR_USAGE);
    cr_expect_eq(filter_add_highpass(&filter, 2, -1, 250, &err), ERR_USAGE);
    cr_expect_eq(filter_add_notch(&filter, 60, 30, 100, &err), ERR_USAGE);
    cr_expect_eq(filter_add_notch(&filter, 50, 0, 500, &err), ERR_USAGE);
    cr_expect_eq(filter_add_lowpass(&filter, 3, 40, 250, &err), ERR_USAGE);
    cr_expect_eq(filter_add_lowpass(&filter, 2, (double)NAN, 250, &err), ERR_USAGE);
    cr_expect_eq(filter.sections, 0);
    for (int i = 0; i < 2; i++)
        cr_assert_eq(filter_add_lowpass(&filter, 4, 40, 250, &err), 0);
    cr_expect_eq(filter_add_notch(&filter, 50, 30, 250, &err), ERR_USAGE, "no room");
}
