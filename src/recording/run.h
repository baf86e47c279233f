/*
 * run.h - a stretch of evenly spaced samples, and the time of each of them.
 *
 * The one description of time that recordings and traces share. A channel, or any trace, is a
 * list of runs in time order; between two runs nothing was recorded. `count` samples, the first
 * of them number `first`, lie evenly over [start_ns, start_ns + span_ns): sample first + k is at
 * start_ns + k * span_ns / count, exactly, so that no rate is rounded (333.333 Hz is 1000 samples
 * over 3 s) and a drifting clock is only another span.
 */
#ifndef RECORDING_RUN_H
#define RECORDING_RUN_H

#include <stddef.h>
#include <stdint.h>

#include "base/ns.h"

struct run {
    int64_t start_ns, span_ns; /* span_ns > 0 */
    int64_t first, count;      /* count > 0; sample numbers go on without a break between runs */
};

static inline int64_t run_end_ns(const struct run *run)
{
    return run->start_ns + run->span_ns;
}

/* Time of sample number `sample` (which may lie outside the run: extrapolated). */
static inline int64_t run_time_ns(const struct run *run, int64_t sample)
{
    return run->start_ns + mul_div(sample - run->first, run->span_ns, run->count);
}

/* Number of the first sample at or after `at_ns`, clamped to [first, first + count]. */
int64_t run_sample_at(const struct run *run, int64_t at_ns);

/* Index of the first run that ends after `at_ns`; `count` when there is none. */
size_t run_find(const struct run *runs, size_t count, int64_t at_ns);

/* Index of the run that holds sample number `sample`; `count` when there is none. */
size_t run_of_sample(const struct run *runs, size_t count, int64_t sample);

double run_rate_hz(const struct run *run);

#endif
