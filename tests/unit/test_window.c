/*
 * test_window.c - selecting marks, cutting windows, summing them up.
 */
#include <criterion/criterion.h>

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "window/cut.h"
#include "window/features.h"
#include "window/select.h"

static struct mark make_mark(int64_t id, const char *code, double onset_s, enum mark_state state)
{
    return (struct mark){.id = id,
                         .code = code,
                         .onset_ns = ns_from_s(onset_s),
                         .until_ns = NS_NONE,
                         .state = state};
}

Test(window, rules_apply_in_order_and_each_exclusion_has_its_reason)
{
    static const char *const codes[] = {"incision"};
    static const struct recipe_exclusion near = {-10 * NS_PER_S, 5 * NS_PER_S, "cautery"};
    struct recipe recipe = {.codes = codes,
                            .code_count = 1,
                            .states = {true, true, true, false},
                            .least_distance_ns = 30 * NS_PER_S,
                            .exclusions = &near,
                            .exclusion_count = 1};
    struct mark marks[] = {
        make_mark(1, "incision", 10, MARK_REJECTED), make_mark(2, "incision", 20, MARK_MARKED),
        make_mark(3, "incision", 49.9, MARK_MARKED), make_mark(4, "incision", 50, MARK_MARKED),
        make_mark(5, "incision", 89.9, MARK_MARKED), make_mark(6, "incision", 90, MARK_MARKED),
        make_mark(7, "cautery", 100, MARK_MARKED),   make_mark(8, "incision", 115, MARK_MARKED),
        make_mark(9, "incision", 120, MARK_MARKED)};
    marks[6].until_ns = 110 * NS_PER_S; /* a span: the 5 s count from its end */
    struct arena arena = {0};
    struct selection selection;
    struct err err = {0};
    cr_assert_eq(select_marks(&recipe, marks, 9, &arena, &selection, &err), 0);
    static const int64_t taken[] = {2, 4, 5, 9};
    cr_assert_eq(selection.count, 4);
    for (size_t i = 0; i < 4; i++)
        cr_expect_eq(selection.marks[i]->id, taken[i]);
    cr_assert_eq(selection.excluded_count, 4);
    cr_expect_str_eq(selection.excluded[0].reason, "state is rejected");
    cr_expect_not_null(strstr(selection.excluded[1].reason, "29.9 s after mark 2"));
    cr_expect_not_null(strstr(selection.excluded[2].reason, "of cautery (mark 7)"));
    cr_expect_eq(selection.excluded[3].mark, 8);
    recipe.first = true;
    cr_assert_eq(select_marks(&recipe, marks, 9, &arena, &selection, &err), 0);
    cr_expect(selection.count == 1 && selection.marks[0]->id == 2);
    arena_free(&arena);
}

/* A sine of `hz` at 500 Hz, 100 s, with a hole of one sample at 70 s. */
static struct trace *sine(double hz)
{
    enum { RATE = 500, COUNT = 100 * RATE };
    static const struct run run = {0, 100 * NS_PER_S, 0, COUNT};
    float *values = malloc(COUNT * sizeof *values);
    for (int k = 0; k < COUNT; k++)
        values[k] = (float)sin(2 * M_PI * hz * k / RATE);
    values[70 * RATE] = NAN;
    struct trace *trace = NULL;
    struct err err = {0};
    cr_assert_eq(memory_trace_new("sine", "mV", &run, 1, values, 0, &trace, &err), 0);
    return trace;
}

static double amplitude(double hz, double rate_hz)
{
    enum { MOST = 4000 };
    float out[MOST];
    struct cutter *cutter = NULL;
    struct err err = {0};
    int64_t count = (int64_t)(20 * rate_hz);
    struct trace *trace = sine(hz);
    cr_assert_eq(cutter_new(rate_hz, 0, &cutter, &err), 0);
    cr_assert_eq(cutter_cut(cutter, trace, ns_from_s(20.00371), count, out, &err), 0);
    double power = 0;
    for (int64_t k = 0; k < count; k++)
        power += (double)out[k] * (double)out[k];
    cutter_free(cutter);
    trace_free(trace);
    return sqrt(2 * power / (double)count);
}

Test(window, a_tone_keeps_its_height_and_an_alias_is_gone)
{
    cr_expect_float_eq(amplitude(3, 20), 1, 1e-3);
    cr_expect_float_eq(amplitude(3, 200), 1, 1e-3);
    cr_expect_lt(amplitude(17, 20), 1e-3, "17 Hz would fold to 3 Hz at 20 Hz");
}

Test(window, same_rate_and_grid_give_the_samples_themselves)
{
    struct trace *trace = sine(3);
    struct cutter *cutter = NULL;
    struct err err = {0};
    float out[1000], in[1000];
    cr_assert_eq(cutter_new(500, 0, &cutter, &err), 0);
    cr_assert_eq(cutter_cut(cutter, trace, 69 * NS_PER_S, 1000, out, &err), 0);
    cr_assert_eq(trace_read(trace, 69 * 500, 1000, in, &err), 0);
    cr_expect_arr_eq(out, in, 500 * sizeof *out);
    cr_expect(isnan(out[500]));
    cr_expect_arr_eq(out + 501, in + 501, 499 * sizeof *out);
    cutter_free(cutter);
    trace_free(trace);
}

Test(window, nothing_is_made_up_outside_or_next_to_a_hole)
{
    struct trace *trace = sine(3);
    struct cutter *cutter = NULL;
    struct err err = {0};
    float out[400];
    cr_assert_eq(cutter_new(10, 0, &cutter, &err), 0);
    cr_assert_eq(cutter_cut(cutter, trace, -20 * NS_PER_S, 200, out, &err), 0);
    for (int k = 0; k < 200; k++)
        cr_expect(isnan(out[k]), "before the recording");
    cr_assert_eq(cutter_cut(cutter, trace, 65 * NS_PER_S + 1, 100, out, &err), 0);
    cr_expect(isnan(out[50]), "at the hole");
    cr_expect_not(isnan(out[0]));
    cr_expect_not(isnan(out[99]));
    cutter_free(cutter);
    trace_free(trace);
}

static int step_read(const struct trace *trace, int64_t first, int64_t count, float *out,
                     struct err *err)
{
    (void)trace;
    (void)err;
    for (int64_t i = 0; i < count; i++)
        out[i] = (float)(first + i);
    return 0;
}

Test(window, a_step_trace_holds_its_value_for_its_age)
{
    static const struct trace_ops ops = {.read = step_read};
    static const int64_t times[] = {0, 10 * NS_PER_S, 12 * NS_PER_S};
    struct trace trace = {
        .ops = &ops, .name = "HR", .unit = "/min", .samples = 3, .times_ns = times};
    struct cutter *cutter = NULL;
    struct err err = {0};
    float out[20];
    cr_assert_eq(cutter_new(1, 5 * NS_PER_S, &cutter, &err), 0);
    cr_assert_eq(cutter_cut(cutter, &trace, -NS_PER_S, 20, out, &err), 0);
    cr_expect(isnan(out[0]), "before the first");
    cr_expect(out[1] == 0 && out[6] == 0 && isnan(out[7]), "older than 5 s");
    cr_expect(out[11] == 1 && out[12] == 1 && out[13] == 2 && isnan(out[19]));
    cutter_free(cutter);
}

/* The same instants are written the same for any length before the mark, and 0 at it. */
Test(window, times_are_those_of_the_decimal_grid)
{
    static const struct {
        int64_t before_s;
        double rate_hz;
        int64_t k;
        double t_s;
    } rows[] = {{5, 50, 251, 0.02}, {5, 50, 249, -0.02}, {30, 250, 7501, 0.004}, {30, 1.1, 33, 0},
                {60, 2.2, 132, 0},  {30, 250, 0, -30},   {30, 1000, 30001, 1e-3}};
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        struct recipe recipe = {.before_ns = rows[i].before_s * NS_PER_S,
                                .rate_hz = rows[i].rate_hz};
        cr_expect_eq(recipe_time_s(&recipe, rows[i].k), rows[i].t_s, "row %zu", i);
    }
}

/* Worked by hand: -2 -1 | 0 1 2 3 4 at 1 Hz. */
Test(window, features_by_hand)
{
    struct recipe recipe = {.before_ns = 2 * NS_PER_S,
                            .after_ns = 5 * NS_PER_S,
                            .rate_hz = 1,
                            .samples = 7,
                            .has_baseline = true,
                            .baseline_from_ns = -2 * NS_PER_S,
                            .baseline_to_ns = 0};
    float values[] = {4, 6, 5, 9, NAN, 3, 7};
    double scratch[7];
    struct features f;
    window_features(&recipe, values, scratch, &f);
    cr_expect_eq(f.baseline, 5);
    cr_expect_float_eq(f.valid_share, 6.0 / 7, 1e-12);
    cr_expect_eq(f.mean, 6);
    cr_expect(f.peak == 9 && f.peak_s == 1);
    cr_expect(f.trough == 3 && f.trough_s == 3);
    cr_expect_eq(f.area, 7 + 5, "two trapezia: 5-9 and 3-7; none across the hole");
    recipe.baseline_mode = BASELINE_PERCENT;
    window_features(&recipe, values, scratch, &f);
    cr_expect_float_eq(f.peak, 80, 1e-4);
    cr_expect_float_eq((double)values[0], -20, 1e-4);
    float again[] = {4, 6, 5, 9, NAN, 3, 7};
    recipe.baseline_mode = BASELINE_Z;
    window_features(&recipe, again, scratch, &f);
    cr_expect_float_eq(f.peak, 4 / sqrt(2), 1e-6, "sd of 4 and 6 is the root of 2");
    float flat[] = {5, 5, 5, 9, 1, 3, 7};
    window_features(&recipe, flat, scratch, &f);
    cr_expect(isnan(flat[3]) && isnan(f.mean) && f.baseline == 5, "a z needs a spread");
    float none[] = {NAN, NAN, NAN, NAN, NAN, NAN, NAN};
    window_features(&recipe, none, scratch, &f);
    cr_expect(isnan(f.mean) && isnan(f.baseline) && isnan(f.area) && f.valid_share == 0);
}
