/*
 * test_line_rate.c - the rate of rows from their times, as devices print them.
 */
#include <criterion/criterion.h>

#include <math.h>
#include <stdlib.h>

#include "base/ns.h"
#include "stream_log.h"

TestSuite(line_rate);

enum { ROWS = 80 };

/* Times of row k in ns, printed with so many decimals of a second. */
static struct stream_log play_times(int64_t (*time_ns)(int k, double rate_hz), double rate_hz,
                                    int decimals)
{
    struct input input = {0};
    input_put(&input, "t,a\n");
    for (int k = 0; k < ROWS; k++)
        input_put(&input, "%.*f,%d\n", decimals, s_from_ns(time_ns(k, rate_hz)), k);
    return input_play(&input);
}

static int64_t even(int k, double rate_hz)
{
    return llround(1e9 * k / rate_hz) + 5 * NS_PER_S;
}

/* Up to 0.4 periods early or late. */
static int64_t jittered(int k, double rate_hz)
{
    uint32_t state = (uint32_t)k * 2654435761u + 12345u;
    state = (state ^ state >> 15) * 2246822519u;
    double off = (double)(state >> 8) / (1 << 24) - 0.5;
    return llround(1e9 * (k + 0.8 * off) / rate_hz) + 5 * NS_PER_S;
}

/* Two seconds are missing after row 20, and the clock is set back after row 40. */
static int64_t jumping(int k, double rate_hz)
{
    return jittered(k, rate_hz) + (k > 20 ? 2 * NS_PER_S : 0) - (k > 40 ? 3600 * NS_PER_S : 0);
}

/* Four rows at a time have one time. */
static int64_t in_bursts(int k, double rate_hz)
{
    return even(k / 4 * 4, rate_hz);
}

static void expect_rate(struct stream_log log, double rate_hz, const char *how)
{
    cr_assert_eq(log.headers, 1, "%s, %g Hz: %s", how, rate_hz, log.complaint);
    cr_expect_eq(log.block_count, ROWS);
    double got_hz = 1e9 * (double)log.blocks / (double)log.block_ns;
    cr_expect_float_eq(got_hz, rate_hz, 1e-6 * rate_hz, "%s: %g Hz, not %g", how, got_hz, rate_hz);
    stream_log_free(&log);
}

static const double rates_hz[] = {0.2, 0.5, 1,   4,   10,  25,  32,           50,
                                  100, 125, 128, 200, 240, 250, 256,          300,
                                  360, 400, 480, 500, 512, 600, 1000.0 / 3.0, 1000};

Test(line_rate, even_times_as_devices_print_them)
{
    for (size_t i = 0; i < sizeof rates_hz / sizeof *rates_hz; i++) {
        expect_rate(play_times(even, rates_hz[i], 3), rates_hz[i], "in ms");
        expect_rate(play_times(even, rates_hz[i], 6), rates_hz[i], "in us");
        expect_rate(play_times(even, rates_hz[i], 9), rates_hz[i], "in ns");
    }
}

Test(line_rate, more_than_a_row_in_a_millisecond)
{
    static const double fast_hz[] = {1024, 2000, 2048, 4000};
    for (size_t i = 0; i < 4; i++) {
        expect_rate(play_times(even, fast_hz[i], 6), fast_hz[i], "in us");
        if (i != 2)
            expect_rate(play_times(even, fast_hz[i], 3), fast_hz[i], "in ms");
    }
}

Test(line_rate, whole_seconds)
{
    expect_rate(play_times(even, 1, 0), 1, "in s");
    expect_rate(play_times(even, 0.2, 0), 0.2, "in s");
    expect_rate(play_times(even, 0.5, 0), 0.5, "in s");
}

Test(line_rate, times_that_jitter_jump_or_come_in_bursts)
{
    static const double some_hz[] = {0.2, 1, 32, 50, 100, 250, 500, 1000};
    for (size_t i = 0; i < sizeof some_hz / sizeof *some_hz; i++) {
        expect_rate(play_times(jittered, some_hz[i], 6), some_hz[i], "jittered");
        if (some_hz[i] >= 32)
            expect_rate(play_times(jumping, some_hz[i], 6), some_hz[i], "jumping");
        expect_rate(play_times(in_bursts, some_hz[i], 6), some_hz[i], "in bursts");
    }
}

/* What no device has is taken as it is. */
Test(line_rate, an_odd_rate_stays_odd)
{
    struct stream_log log = play_times(even, 217.5, 6);
    cr_assert_eq(log.headers, 1);
    cr_expect_float_eq(1e9 * (double)log.blocks / (double)log.block_ns, 217.5, 0.01);
    stream_log_free(&log);
}

/* Slow rows are not waited for longer than it takes. */
Test(line_rate, five_even_rows_tell_a_slow_rate)
{
    struct input input = {0};
    input_put(&input, "t,a\n0,1\n1,2\n2,3\n3,4\n");
    struct stream_log log = input_play(&input);
    cr_expect_eq(log.headers, 0);
    stream_log_free(&log);
    input = (struct input){0};
    input_put(&input, "t,a\n0,1\n1,2\n2,3\n3,4\n4,5\n");
    log = input_play(&input);
    cr_expect_eq(log.headers, 1);
    cr_expect_eq(log.block_count, 5);
    stream_log_free(&log);
}

Test(line_rate, times_that_do_not_rise_are_counted)
{
    struct input input = {0};
    input_put(&input, "t,a\n");
    for (int k = 0; k < ROWS; k++)
        input_put(&input, "7,%d\n", k);
    struct stream_log log = input_play(&input);
    cr_expect_eq(log.headers, 0);
    cr_expect_eq(log.garbled, 64);
    stream_log_free(&log);
}

/* No period of less than a nanosecond, and no division by nothing. */
Test(line_rate, times_that_hardly_rise)
{
    struct input input = {0};
    input_put(&input, "t,a\n");
    for (int k = 0; k < ROWS; k++)
        input_put(&input, "0.%09d,%d\n", k / 2, k);
    struct stream_log log = input_play(&input);
    cr_expect(log.headers == 0 || log.block_ns > 0);
    stream_log_free(&log);
}
