/*
 * test_clock_map.c - recording time to case time and back, over offsets, drifts and pieces.
 */
#include <criterion/criterion.h>

#include <stdlib.h>

#include "timeline/clock_map.h"

/* A clock 50 ppm slow, restarted after an hour, then 120 ppm fast. */
static const struct clock_piece two[] = {
    {10 * NS_PER_S, 1000000, 500 * NS_PER_S, 1000050, 0},
    {3600 * NS_PER_S, 1000000, 4200 * NS_PER_S, 999880, 0},
};

static struct clock_map map_of(const struct clock_piece *pieces, size_t count)
{
    return (struct clock_map){.aligned = true, .pieces = pieces, .piece_count = count};
}

Test(clock_map, without_pieces_it_is_an_offset)
{
    struct clock_map map = clock_map_on_trust(2000, 500);
    struct run run = {7, NS_PER_S, 0, 100}, out;
    cr_expect_eq(clock_map_to_case(&map, 10), 1510);
    cr_expect_eq(clock_map_from_case(&map, 1510), 10);
    cr_expect_not(map.aligned);
    clock_map_runs(&map, &run, 1, &out);
    cr_expect(out.start_ns == 1507 && out.span_ns == NS_PER_S && out.count == 100);
    map = clock_map_on_trust(NS_NONE, 500);
    cr_expect_eq(clock_map_to_case(&map, 10), 10);
}

Test(clock_map, drift_has_the_sign_of_a_slow_recorder)
{
    cr_expect_float_eq(clock_piece_drift_ppm(&two[0]), 50, 1e-9);
    cr_expect_float_eq(clock_piece_drift_ppm(&two[1]), -120, 1e-9);
    struct clock_map map = map_of(two, 2);
    /* After 1000 s on its own slow clock the case is 50 ms further on. */
    cr_expect_eq(clock_map_to_case(&map, 1010 * NS_PER_S), 1500 * NS_PER_S + 50 * NS_PER_MS);
    cr_expect_eq(clock_map_to_case(&map, 4600 * NS_PER_S), 5200 * NS_PER_S - 120 * NS_PER_MS);
}

Test(clock_map, a_time_before_the_first_piece_goes_by_the_first)
{
    struct clock_map map = map_of(two, 2);
    cr_expect_eq(clock_map_to_case(&map, 0), 490 * NS_PER_S - 500 * NS_PER_US);
    cr_expect_eq(clock_map_from_case(&map, 490 * NS_PER_S - 500 * NS_PER_US), 0);
}

Test(clock_map, a_time_between_pieces_is_held_at_the_next)
{
    static const struct clock_piece close[] = {
        {0, 1000, 0, 1001, 0},
        {1000 * NS_PER_S, 1000, 1000 * NS_PER_S + NS_PER_MS, 1000, 0},
    };
    struct clock_map map = map_of(close, 2);
    /* The first line reaches the second piece's start 999 ms early. */
    cr_expect_eq(clock_map_to_case(&map, 999500 * NS_PER_MS), 1000 * NS_PER_S + NS_PER_MS);
    cr_expect_eq(clock_map_to_case(&map, 1000 * NS_PER_S), 1000 * NS_PER_S + NS_PER_MS);
    /* Where nothing was recorded the last moment before is the answer. */
    map = map_of(two, 2);
    cr_expect_eq(clock_map_from_case(&map, 4195 * NS_PER_S), 3600 * NS_PER_S);
}

Test(clock_map, never_falls)
{
    struct clock_map map = map_of(two, 2);
    int64_t last_case = INT64_MIN, last_own = INT64_MIN;
    for (int64_t at = 0; at < 5000 * NS_PER_S; at += 48271 * 7919) {
        int64_t to = clock_map_to_case(&map, at), from = clock_map_from_case(&map, at);
        cr_assert(to >= last_case && from >= last_own, "at %lld", (long long)at);
        last_case = to;
        last_own = from;
    }
}

Test(clock_map, there_and_back_is_exact_where_time_is_not_shrunk)
{
    struct clock_map map = map_of(two, 2);
    for (int64_t k = 0; k < 20000; k++) {
        int64_t own = k * 173205081 % (3500 * NS_PER_S);
        cr_assert_eq(clock_map_from_case(&map, clock_map_to_case(&map, own)), own);
        int64_t other = 3600 * NS_PER_S + own; /* shrunk: the other way round is exact */
        int64_t in_case = clock_map_to_case(&map, other);
        cr_assert_eq(clock_map_to_case(&map, clock_map_from_case(&map, in_case)), in_case);
        cr_assert_leq(other - clock_map_from_case(&map, in_case), 1);
    }
}

/* 1000 samples over 3 s on a clock 100 ppm slow: still an exact rational on case time. */
Test(clock_map, a_run_at_333_hz_keeps_its_exact_rate)
{
    static const struct clock_piece slow = {0, 1000000, NS_PER_S, 1000100, 0};
    struct clock_map map = map_of(&slow, 1);
    struct run run = {3 * NS_PER_S, 30000 * NS_PER_S, 0, 10000000}, out;
    clock_map_runs(&map, &run, 1, &out);
    cr_expect_eq(out.start_ns, 4 * NS_PER_S + 300 * NS_PER_US);
    cr_expect_eq(out.span_ns, 30003 * NS_PER_S);
    for (int64_t k = 0; k < 10000000; k += 9973)
        cr_assert_leq(llabs(run_time_ns(&out, k) - clock_map_to_case(&map, run_time_ns(&run, k))),
                      1, "sample %lld", (long long)k);
}

Test(clock_map, each_run_goes_by_the_piece_it_starts_in)
{
    struct clock_map map = map_of(two, 2);
    struct run runs[] = {{10 * NS_PER_S, 1000 * NS_PER_S, 0, 1000},
                         {3600 * NS_PER_S, 1000 * NS_PER_S, 1000, 1000}};
    struct run out[2];
    clock_map_runs(&map, runs, 2, out);
    cr_expect_eq(out[0].start_ns, 500 * NS_PER_S);
    cr_expect_eq(out[0].span_ns, 1000 * NS_PER_S + 50 * NS_PER_MS);
    cr_expect_eq(out[1].start_ns, 4200 * NS_PER_S);
    cr_expect_eq(out[1].span_ns, 1000 * NS_PER_S - 120 * NS_PER_MS);
    cr_expect_eq(out[1].first, 1000);
}
