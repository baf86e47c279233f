/*
 * test_review_columns.c - columns of dots against every sample looked at one by one, and display
 * filters against sines.
 */
#include <criterion/criterion.h>

#include <math.h>
#include <stdlib.h>

#include "terminal/columns.h"

enum { CELLS = 60, DOTS = CELLS * DOTS_PER_CELL };

static const struct display_filter no_filter = {0};

/* Two stretches at `rate` Hz, 100 s each, with 50 s of nothing in between. */
static struct trace *two_runs(int rate, float (*value)(int64_t sample))
{
    int64_t count = 100 * rate;
    struct run runs[] = {{0, 100 * NS_PER_S, 0, count},
                         {150 * NS_PER_S, 100 * NS_PER_S, count, count}};
    float *samples = malloc((size_t)(2 * count) * sizeof *samples);
    struct trace *trace;
    for (int64_t i = 0; i < 2 * count; i++)
        samples[i] = value(i);
    cr_assert_eq(memory_trace_new("x", "mV", runs, 2, samples, 0, &trace, NULL), 0);
    return trace;
}

static float wave(int64_t sample)
{
    if (sample % 977 == 500)
        return 40; /* lone spikes */
    if (sample % 5000 < 40)
        return NAN;
    return (float)(sin((double)sample * 0.37) + sin((double)sample * 0.011));
}

/* All samples of a column, by their times alone. */
static void look(const struct trace *trace, int64_t from_ns, int64_t to_ns, float *low, float *high)
{
    *low = INFINITY;
    *high = -INFINITY;
    for (int64_t i = 0; i < trace->samples; i++) {
        int64_t at = trace_time_ns(trace, i);
        float value;
        if (at < from_ns || at >= to_ns)
            continue;
        cr_assert_eq(trace_read(trace, i, 1, &value, NULL), 0);
        if (isnan(value))
            continue;
        *low = value < *low ? value : *low;
        *high = value > *high ? value : *high;
    }
}

static void fill(const struct trace *trace, const struct view *view,
                 const struct display_filter *filter, struct column *out,
                 struct columns_answer *answer)
{
    struct column_room room = {0};
    cr_assert_eq(column_room_resize(&room, DOTS, NULL), 0);
    *answer = columns_fill(NULL, trace, filter, view, &room, out);
    column_room_free(&room);
}

Test(review_columns, hold_every_sample_of_their_time)
{
    struct trace *trace = two_runs(100, wave);
    static const int64_t spans_ns[] = {NS_PER_S / 10, NS_PER_S, 7 * NS_PER_S, 250 * NS_PER_S};
    static const int64_t froms_ns[] = {0, 5 * NS_PER_S + 1, 96 * NS_PER_S, 148 * NS_PER_S};
    for (size_t s = 0; s < 4; s++) {
        for (size_t f = 0; f < 4; f++) {
            struct view view = {froms_ns[f], spans_ns[s], CELLS};
            struct column columns[DOTS];
            struct columns_answer answer;
            fill(trace, &view, &no_filter, columns, &answer);
            cr_expect_not(answer.pending);
            for (int dot = 0; dot < DOTS; dot++) {
                float low, high;
                look(trace, view_dot_ns(&view, dot), view_dot_ns(&view, dot + 1), &low, &high);
                if (low > high)
                    continue;
                cr_expect(columns[dot].kind == COLUMN_DATA && columns[dot].low <= low &&
                              columns[dot].high >= high,
                          "span %zu from %zu dot %d: %g..%g, has %g..%g", s, f, dot, (double)low,
                          (double)high, (double)columns[dot].low, (double)columns[dot].high);
            }
        }
    }
    trace_free(trace);
}

Test(review_columns, a_gap_is_empty_and_a_line_between_samples_is_not)
{
    struct trace *trace = two_runs(10, wave);
    struct view view = {90 * NS_PER_S, 60 * NS_PER_S, CELLS}; /* 0.5 s a dot */
    struct column columns[DOTS];
    struct columns_answer answer;
    fill(trace, &view, &no_filter, columns, &answer);
    for (int dot = 21; dot < DOTS; dot++)
        cr_expect_eq(columns[dot].kind, COLUMN_NOTHING, "dot %d lies in the gap", dot);
    /* 12 dots a sample: a column without a sample lies on the line between its neighbours. */
    view = (struct view){20 * NS_PER_S, NS_PER_S, CELLS};
    fill(trace, &view, &no_filter, columns, &answer);
    for (int dot = 0; dot + 1 < DOTS; dot++) {
        cr_expect_eq(columns[dot].kind, COLUMN_DATA, "dot %d", dot);
        cr_expect(columns[dot].low <= columns[dot + 1].high &&
                      columns[dot + 1].low <= columns[dot].high,
                  "dots %d and %d are not joined", dot, dot + 1);
    }
    trace_free(trace);
}

static float ramp(int64_t sample)
{
    return (float)sample;
}

Test(review_columns, whole_blocks_lose_no_sample_and_cross_no_gap)
{
    int rate = 1000;
    struct trace *trace = two_runs(rate, ramp);
    struct view view = {0, 250 * NS_PER_S, CELLS}; /* 2083 samples a dot: by blocks */
    struct column columns[DOTS];
    struct columns_answer answer;
    fill(trace, &view, &no_filter, columns, &answer);
    for (int dot = 0; dot < DOTS; dot++) {
        int64_t from = view_dot_ns(&view, dot), to = view_dot_ns(&view, dot + 1);
        bool gap = from >= 100 * NS_PER_S && to <= 150 * NS_PER_S;
        cr_expect_eq(columns[dot].kind, gap ? COLUMN_NOTHING : COLUMN_DATA, "dot %d", dot);
        if (gap)
            continue;
        double low, high;
        low = s_from_ns(from < 125 * NS_PER_S ? from : from - 50 * NS_PER_S) * rate;
        high = s_from_ns(to < 125 * NS_PER_S ? to : to - 50 * NS_PER_S) * rate;
        low = from < 100 * NS_PER_S || from > 150 * NS_PER_S ? low : 100.0 * rate;
        high = to < 100 * NS_PER_S || to > 150 * NS_PER_S ? high : 100.0 * rate;
        cr_expect(fabs((double)columns[dot].low - low) <= OVERVIEW_BLOCK &&
                      fabs((double)columns[dot].high - high) <= OVERVIEW_BLOCK,
                  "dot %d holds %g..%g, not about %g..%g", dot, (double)columns[dot].low,
                  (double)columns[dot].high, low, high);
        if (dot > 0 && columns[dot - 1].kind == COLUMN_DATA)
            cr_expect(columns[dot].low <= columns[dot - 1].high + 1, "dot %d: samples lost", dot);
    }
    trace_free(trace);
}

Test(review_columns, robust_range_leaves_a_lone_spike_out)
{
    struct column columns[DOTS] = {0};
    struct column_room room = {0};
    double low, high;
    cr_assert_eq(column_room_resize(&room, DOTS, NULL), 0);
    cr_expect_not(columns_range(columns, DOTS, &room, &low, &high));
    for (int dot = 0; dot < DOTS; dot++)
        columns[dot] = (struct column){-1, 1, COLUMN_DATA};
    columns[7].high = 300;
    columns[9].low = -300;
    cr_expect(columns_range(columns, DOTS, &room, &low, &high));
    cr_expect(low == -1 && high == 1, "%g..%g", low, high);
    column_room_free(&room);
}

static float hum(int64_t sample)
{
    double t = (double)sample / 1000;
    return (float)(5 + sin(2 * M_PI * 10 * t) + 0.5 * sin(2 * M_PI * 50 * t));
}

/* Largest swing over all columns of a second. */
static float swing(const struct column *columns)
{
    float low = INFINITY, high = -INFINITY;
    for (int dot = 0; dot < DOTS; dot++) {
        low = columns[dot].low < low ? columns[dot].low : low;
        high = columns[dot].high > high ? columns[dot].high : high;
    }
    return high - low;
}

Test(review_columns, filters_take_what_they_say_and_move_nothing)
{
    struct trace *trace = two_runs(1000, hum);
    struct view view = {50 * NS_PER_S, NS_PER_S, CELLS};
    struct column plain[DOTS], filtered[DOTS];
    struct columns_answer answer;
    struct display_filter filter = {0};
    display_filter_next_notch(&filter, 1000);
    display_filter_next_high_pass(&filter, 1000);
    display_filter_next_high_pass(&filter, 1000);
    fill(trace, &view, &no_filter, plain, &answer);
    fill(trace, &view, &filter, filtered, &answer);
    cr_expect_not(answer.unfiltered);
    cr_expect_float_eq(swing(filtered), 2, 0.05, "10 Hz of 2 stays, has %g",
                       (double)swing(filtered));
    cr_expect_gt(swing(plain), 2.5f);
    /* 10 Hz starts at phase 0 at the view's edge: its first crest is 25 ms later, dot 3. */
    cr_expect_float_eq(filtered[3].high, 1, 0.05);
    view = (struct view){0, 250 * NS_PER_S, CELLS};
    fill(trace, &view, &filter, filtered, &answer);
    cr_expect(answer.unfiltered, "too long a stretch must say so");
    trace_free(trace);
}

Test(review_columns, filter_choices_pass_over_what_a_slow_rate_cannot_carry)
{
    struct display_filter filter = {0};
    char text[FILTER_TEXT_SIZE];
    display_filter_next_notch(&filter, 100);
    cr_expect_not(display_filter_on(&filter), "a notch at 50 Hz of 100 Hz is none");
    display_filter_next_low_pass(&filter, 100);
    display_filter_next_high_pass(&filter, 100);
    display_filter_text(&filter, text);
    cr_expect_str_eq(text, "0.05-40 Hz");
}
