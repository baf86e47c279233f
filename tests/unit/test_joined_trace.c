/*
 * test_joined_trace.c - parts of a stream as one trace, against a plain array.
 */
#include <criterion/criterion.h>

#include <math.h>
#include <stdlib.h>

#include "trace/joined_trace.h"

static struct trace *part(int64_t start_ns, int64_t span_ns, int count, float first)
{
    const struct run run = {start_ns, span_ns, 0, count};
    float *values = malloc((size_t)count * sizeof *values);
    struct trace *trace = NULL;
    struct err err = {0};
    cr_assert_not_null(values);
    for (int i = 0; i < count; i++)
        values[i] = first + (float)i;
    cr_assert_eq(memory_trace_new("ECG", "mV", &run, 1, values, 0, &trace, &err), 0);
    return trace;
}

Test(joined_trace, reads_as_if_it_were_one)
{
    struct trace *parts[] = {part(0, NS_PER_S, 10, 0), part(3 * NS_PER_S, NS_PER_S, 7, 10),
                             part(5 * NS_PER_S, NS_PER_S, 13, 17)};
    struct trace *joined = NULL;
    struct err err = {0};
    cr_assert_eq(joined_trace_new((const struct trace *const *)parts, 3, &joined, &err), 0);
    cr_assert_eq(joined->samples, 30);
    cr_assert_eq(joined->run_count, 3);
    for (int first = 0; first < 30; first++) {
        for (int count = 1; first + count <= 30; count++) {
            float out[30], low, high;
            cr_assert_eq(trace_read(joined, first, count, out, &err), 0, "%s", err.text);
            for (int i = 0; i < count; i++)
                cr_assert_eq(out[i], (float)(first + i));
            cr_assert_eq(trace_minmax(joined, first, count, &low, &high, &err), 0);
            cr_assert(low == (float)first && high == (float)(first + count - 1));
        }
    }
    cr_expect_eq(trace_time_ns(joined, 10), 3 * NS_PER_S);
    cr_expect_eq(trace_time_ns(joined, 17), 5 * NS_PER_S);
    float out[2];
    cr_expect_neq(trace_read(joined, 29, 2, out, &err), 0);
    trace_free(joined);
    for (int i = 0; i < 3; i++)
        trace_free(parts[i]);
}

Test(joined_trace, an_end_that_reaches_into_the_next_stops_there)
{
    struct trace *parts[] = {part(0, NS_PER_S + 500, 10, 0), part(NS_PER_S, NS_PER_S, 10, 10)};
    struct trace *joined = NULL;
    struct err err = {0};
    cr_assert_eq(joined_trace_new((const struct trace *const *)parts, 2, &joined, &err), 0);
    cr_expect_eq(run_end_ns(&joined->runs[0]), NS_PER_S);
    for (int64_t k = 1; k < 20; k++)
        cr_expect_gt(trace_time_ns(joined, k), trace_time_ns(joined, k - 1));
    trace_free(joined);
    trace_free(parts[0]);
    trace_free(parts[1]);
}

Test(joined_trace, parts_out_of_order_are_refused)
{
    struct trace *parts[] = {part(NS_PER_S, NS_PER_S, 10, 0), part(0, NS_PER_S, 10, 10)};
    struct trace *joined = NULL;
    struct err err = {0};
    cr_expect_eq(joined_trace_new((const struct trace *const *)parts, 2, &joined, &err),
                 ERR_CONFLICT);
    cr_expect_null(joined);
    trace_free(parts[0]);
    trace_free(parts[1]);
}
