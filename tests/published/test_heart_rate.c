/*
 * test_heart_rate.c - `heart-rate` against its definition in Berger et al. 1986, by values worked
 * out by hand from the paper's formula, and the properties that the paper claims for it.
 */
#include <criterion/criterion.h>

#include <math.h>

#include "base/ns.h"
#include "physiology/derivation.h"

static struct trace *rate_of(const double *beats_s, const uint8_t *flags, size_t count,
                             double rate_hz)
{
    struct train train = {0};
    struct err err = {0};
    for (size_t i = 0; i < count; i++)
        cr_assert_eq(train_add(&train, ns_from_s(beats_s[i]), 1, flags ? flags[i] : 0, &err), 0);
    const double parameters[] = {rate_hz, 3};
    struct derive_input input = {.train = &train, .parameters = parameters, .threads = 1};
    struct derived out = {0};
    cr_assert_eq(derivation_find("heart-rate")->compute(&input, &out, &err), 0, "%s", err.text);
    train_free(&train);
    return out.trace;
}

static float value_at(const struct trace *trace, double at_s)
{
    float value;
    int64_t age_ns;
    struct err err = {0};
    cr_assert_eq(trace_value_at(trace, ns_from_s(at_s), &value, &age_ns, &err), 0);
    return value;
}

/* Beats 0, 0.8, 1.7, 2.5, 3.2, 4.0 s at fs 4. At 0.75: (0.3/0.8 + 0.2/0.9) of an interval in
 * [0.5, 1.0] is 0.597222, times 4/2, is 1.194444 a second: 71.666667 a minute. */
Test(heart_rate, worked_values_of_the_definition)
{
    static const double beats[] = {0, 0.8, 1.7, 2.5, 3.2, 4.0};
    static const struct {
        double at_s, rate;
    } rows[] = {{0.5, 75},         {0.75, 71.666667}, {1.0, 67.5},
                {1.25, 66.666667}, {2.5, 80.357143},  {3.0, 84.642857}};
    struct trace *trace = rate_of(beats, NULL, 6, 4);
    cr_expect_str_eq(trace->unit, "/min");
    cr_expect_eq(trace->samples, 17);
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++)
        cr_expect_float_eq(value_at(trace, rows[i].at_s), rows[i].rate, 2e-5, "at %g s: %.7g",
                           rows[i].at_s, (double)value_at(trace, rows[i].at_s));
    cr_expect(isnan(value_at(trace, 0)), "the window reaches before the first beat");
    cr_expect_not(isnan(value_at(trace, 0.25)));
    cr_expect(isnan(value_at(trace, 4)), "the window reaches past the last beat");
    trace_free(trace);
}

/* "Exact area": each interval counts once. The windows of neighbours overlap by half, so the sum
 * over all valid samples lacks half a sample of the first and of the last interval. */
Test(heart_rate, area_is_the_number_of_intervals)
{
    enum { BEATS = 200 };
    const double step_s = 0.02;
    double beats[BEATS];
    beats[0] = 10;
    for (size_t i = 1; i < BEATS; i++)
        beats[i] = beats[i - 1] + 0.8 + 0.15 * sin((double)i * 0.7) + 0.05 * sin((double)i * 2.3);
    beats[BEATS - 1] = ceil(beats[BEATS - 1] / step_s) * step_s; /* on the grid, as the first is */
    struct trace *trace = rate_of(beats, NULL, BEATS, 1 / step_s);
    double area = 0;
    for (int64_t i = 0; i < trace->samples; i++) {
        float value;
        struct err err = {0};
        cr_assert_eq(trace_read(trace, i, 1, &value, &err), 0);
        area += isnan(value) ? 0 : (double)value / 60 * step_s;
    }
    double first = beats[1] - beats[0], last = beats[BEATS - 1] - beats[BEATS - 2];
    cr_expect_float_eq(area, BEATS - 1 - step_s / 2 / first - step_s / 2 / last, 1e-4, "%.6f",
                       area);
    trace_free(trace);
}

Test(heart_rate, no_rate_across_a_gap_or_a_pause)
{
    static const double beats[] = {0, 1, 2, 3, 5, 6, 7, 10.5, 11.5, 12.5};
    static const uint8_t flags[] = {TRAIN_GAP, 0, 0, 0, TRAIN_GAP, 0, 0, 0, 0, 0};
    struct trace *trace = rate_of(beats, flags, 10, 4);
    static const struct {
        double at_s;
        bool valid;
    } rows[] = {{2, true},    {2.75, true}, {3, false}, {4, false},    {5, false},   {5.25, true},
                {6.75, true}, {7, false},   {9, false}, {10.5, false}, {10.75, true}};
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        float value = value_at(trace, rows[i].at_s);
        cr_expect_eq(!isnan(value), rows[i].valid, "at %g s", rows[i].at_s);
        if (rows[i].valid)
            cr_expect_float_eq(value, 60, 1e-4);
    }
    trace_free(trace);
}

/* A recorder whose clock is 60 years off: no samples are laid out in between. */
Test(heart_rate, nothing_is_laid_over_a_long_silence)
{
    static const double beats[] = {1, 2, 3, 4, 1.9e9, 1.9e9 + 1, 1.9e9 + 2};
    static const uint8_t flags[] = {0, 0, 0, 0, TRAIN_GAP, 0, 0};
    struct trace *trace = rate_of(beats, flags, 7, 4);
    cr_assert_eq(trace->run_count, 2);
    cr_expect_eq(trace->samples, 13 + 9);
    cr_expect_float_eq(value_at(trace, 2.5), 60, 1e-4);
    cr_expect_float_eq(value_at(trace, 1.9e9 + 1), 60, 1e-4);
    cr_expect(isnan(value_at(trace, 4)));
    cr_expect(isnan(value_at(trace, 1.9e9)));
    trace_free(trace);
}

/* The grid goes through case time 0: beats that begin later give the same values at the same
 * instants, whatever the rate. */
Test(heart_rate, grid_does_not_depend_on_where_the_beats_begin)
{
    double beats[120];
    for (size_t i = 0; i < 120; i++)
        beats[i] = -20.13 + (double)i * 0.71 + 0.05 * sin((double)i);
    static const double rates[] = {0.5, 3, 4, 7.3, 100};
    for (size_t r = 0; r < sizeof rates / sizeof *rates; r++) {
        struct trace *whole = rate_of(beats, NULL, 120, rates[r]);
        struct trace *late = rate_of(beats + 50, NULL, 70, rates[r]);
        int64_t skipped = whole->samples - late->samples, differing = 0;
        for (int64_t i = 0; i < late->samples; i++) {
            float a, b;
            struct err err = {0};
            cr_assert_eq(trace_read(whole, i + skipped, 1, &a, &err), 0);
            cr_assert_eq(trace_read(late, i, 1, &b, &err), 0);
            cr_expect_leq(llabs(trace_time_ns(whole, i + skipped) - trace_time_ns(late, i)), 1);
            differing += !isnan(b) && fabsf(a - b) > 1e-4f;
        }
        cr_expect_eq(differing, 0, "rate %g", rates[r]);
        trace_free(whole);
        trace_free(late);
    }
}

Test(heart_rate, too_few_beats_give_an_empty_trace)
{
    static const double beats[] = {1.5};
    for (size_t count = 0; count < 2; count++) {
        struct trace *trace = rate_of(beats, NULL, count, 4);
        cr_expect_eq(trace->samples, 0);
        trace_free(trace);
    }
}
