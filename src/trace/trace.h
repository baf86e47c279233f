/*
 * trace.h - the one idea of the program: anything that can be sampled at case time.
 *
 * A raw channel, a filtered one, heart rate from beats, a band power: each is a struct trace. The
 * screen scrolls traces, the exporter cuts windows out of them, and neither knows which kind it
 * has. A trace has a name, a unit, and numbered samples laid on case time by runs (recording/
 * run.h); samples are read by number in constant time, and NaN says that a sample is not valid:
 * missing, artefact, or out of reach of the method.
 *
 * A step trace (a monitor's numerics) has no runs but a time for each sample: a value holds until
 * the next one, and knows its age.
 *
 * Threads: trace_read() and trace_minmax() may be called from several threads at once.
 * Ownership: whoever made a trace frees it with trace_free(); a trace that reads another one does
 * not own it and must be freed first.
 */
#ifndef TRACE_TRACE_H
#define TRACE_TRACE_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "base/err.h"
#include "recording/role.h"
#include "recording/run.h"

struct trace;

struct trace_ops {
    /* Samples [first, first + count), checked to lie inside, into out, shape (count). */
    int (*read)(const struct trace *trace, int64_t first, int64_t count, float *out,
                struct err *err);
    /* Extremes of the same range, NaN left out; NULL = trace.c goes through read(). */
    int (*minmax)(const struct trace *trace, int64_t first, int64_t count, float *low, float *high,
                  struct err *err);
    void (*free)(struct trace *trace); /* frees the struct too */
};

/* Kinds of traces embed this as their first member. Fields are set once, by the maker, and point
 * to memory that lives as long as the trace. */
struct trace {
    const struct trace_ops *ops;
    const char *name; /* "ECG II", "heart-rate" */
    const char *unit;
    enum role role; /* ROLE_NONE for derived ones */
    double rate_hz; /* of its first run; 0 for a step trace */
    int64_t samples;
    const struct run *runs; /* case time; NULL for a step trace */
    size_t run_count;
    const int64_t *times_ns; /* step trace: case time of each sample; NULL otherwise */
    int64_t reach_ns; /* how far to each side one bad input sample makes output invalid; 0 raw */
};

MUST_CHECK int trace_read(const struct trace *trace, int64_t first, int64_t count, float *out,
                          struct err *err);
MUST_CHECK int trace_minmax(const struct trace *trace, int64_t first, int64_t count, float *low,
                            float *high, struct err *err);
void trace_free(struct trace *trace);

/* First and last instant: of the first sample, and just after the last. Both 0 when empty. */
void trace_extent(const struct trace *trace, int64_t *from_ns, int64_t *to_ns);

/* Numbers of the samples with from_ns <= time < to_ns: [*first, *first + *count). */
void trace_range(const struct trace *trace, int64_t from_ns, int64_t to_ns, int64_t *first,
                 int64_t *count);

/* Case time of a sample. */
int64_t trace_time_ns(const struct trace *trace, int64_t sample);

/* The value that stands at `at_ns`: the nearest sample within half a period in a run, the last
 * one in a step trace (age_ns says how old, 0 otherwise). NaN where there is none. */
MUST_CHECK int trace_value_at(const struct trace *trace, int64_t at_ns, float *out, int64_t *age_ns,
                              struct err *err);

/* A trace that owns its samples in memory, e.g. a derived one: takes over `samples` (malloc) and
 * copies name, unit and runs. */
MUST_CHECK int memory_trace_new(const char *name, const char *unit, const struct run *runs,
                                size_t run_count, float *samples, int64_t reach_ns,
                                struct trace **out, struct err *err);

#endif
