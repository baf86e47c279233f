/*
 * test_trace.c - runs, traces by number and by time, trains.
 */
#include <criterion/criterion.h>

#include <math.h>
#include <stdlib.h>

#include "trace/trace.h"
#include "trace/train.h"

/* 1000 samples over 3 s: the rate 333.333... Hz that no double holds. */
Test(trace, run_times_are_exact_at_a_rate_that_is_not_a_number)
{
    struct run run = {5, 3 * NS_PER_S, 100, 1000};
    cr_expect_eq(run_time_ns(&run, 100), 5);
    cr_expect_eq(run_time_ns(&run, 101), 5 + 3000000);
    cr_expect_eq(run_time_ns(&run, 1100), 5 + 3 * NS_PER_S);
    for (int64_t k = 100; k < 1100; k++)
        cr_assert_eq(run_sample_at(&run, run_time_ns(&run, k)), k);
    struct run odd = {0, 1000000007, 0, 997};
    for (int64_t k = 0; k < 997; k++) {
        int64_t at = run_time_ns(&odd, k);
        cr_assert_eq(run_sample_at(&odd, at), k);
        cr_assert_eq(run_sample_at(&odd, at + 1), k + 1);
    }
}

static struct trace *two_runs(void)
{
    static const struct run runs[] = {{0, NS_PER_S, 0, 10}, {5 * NS_PER_S, NS_PER_S, 10, 10}};
    float *values = malloc(20 * sizeof *values);
    for (int i = 0; i < 20; i++)
        values[i] = (float)i;
    values[3] = NAN;
    struct trace *trace = NULL;
    struct err err = {0};
    cr_assert_eq(memory_trace_new("t", "mV", runs, 2, values, 0, &trace, &err), 0);
    return trace;
}

Test(trace, range_value_and_extremes_across_a_gap)
{
    struct trace *trace = two_runs();
    struct err err = {0};
    int64_t first, count, age;
    float low, high, value;
    trace_range(trace, 0, 6 * NS_PER_S, &first, &count);
    cr_expect(first == 0 && count == 20);
    trace_range(trace, NS_PER_S / 2, 3 * NS_PER_S, &first, &count);
    cr_expect(first == 5 && count == 5);
    trace_range(trace, 2 * NS_PER_S, 4 * NS_PER_S, &first, &count);
    cr_expect_eq(count, 0);
    cr_expect(trace_minmax(trace, 2, 3, &low, &high, &err) == 0 && low == 2 && high == 4);
    cr_expect(trace_minmax(trace, 3, 1, &low, &high, &err) == 0 && isnan(low) && isnan(high));
    cr_expect(trace_value_at(trace, 540 * NS_PER_MS, &value, &age, &err) == 0 && value == 5);
    cr_expect(trace_value_at(trace, 3 * NS_PER_S, &value, &age, &err) == 0 && isnan(value));
    cr_expect_neq(trace_read(trace, 15, 6, &value, &err), 0);
    cr_expect_neq(trace_read(trace, -1, 1, &value, &err), 0);
    int64_t from, to;
    trace_extent(trace, &from, &to);
    cr_expect(from == 0 && to == 6 * NS_PER_S);
    trace_free(trace);
}

Test(trace, a_train_rises)
{
    struct train train = {0};
    struct err err = {0};
    cr_expect_eq(train_add(&train, 10, 1, 0, &err), 0);
    cr_expect_neq(train_add(&train, 10, 1, 0, &err), 0);
    cr_expect_eq(train_add(&train, 20, 1, 0, &err), 0);
    cr_expect_eq(train_find(&train, 10), 0);
    cr_expect_eq(train_find(&train, 11), 1);
    cr_expect_eq(train_find(&train, 21), 2);
    train_free(&train);
}
