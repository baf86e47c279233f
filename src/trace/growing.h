/*
 * growing.h - samples that are still coming in, as traces: the newest in memory, older ones read
 * back from the file they were written to, and extremes of every stretch in constant time.
 *
 * One writer thread appends; one reader thread refreshes, and reads its traces (as may other
 * threads between two refreshes). The writer never waits for the reader longer than a copy of some
 * thousand samples takes. Finished blocks of extremes never move.
 *
 * Memory: a ring of `keep` samples a channel, and the extremes (8 bytes for every OVERVIEW_BLOCK
 * samples and a sixteenth of that for the levels above): 8 MB an hour for 64 channels at 1 kHz.
 */
#ifndef TRACE_GROWING_H
#define TRACE_GROWING_H

#include <stddef.h>
#include <stdint.h>

#include "base/err.h"
#include "timeline/clock_map.h"
#include "trace/trace.h"

struct growing;

struct growing_channel {
    const char *name, *unit; /* copied */
    enum role role;
    double rate_hz;
    int64_t keep; /* samples kept in memory; at least 2 * OVERVIEW_BLOCK */
};

/* Reads samples that have left the ring: [first, first + count) of a channel. Called from the
 * threads that read traces, with no lock held. */
struct growing_past {
    int (*read)(void *context, size_t channel, int64_t first, int64_t count, float *out,
                struct err *err);
    void *context;
};

MUST_CHECK int growing_new(const struct growing_channel *channels, size_t count,
                           const struct growing_past *past, struct growing **out, struct err *err);
void growing_free(struct growing *growing);

/* Writer: `count` more samples of a channel, NaN where missing; after the first growing_run(). All
 * of them or, when memory runs out, none. */
MUST_CHECK int growing_append(struct growing *growing, size_t channel, const float *samples,
                              int64_t count, struct err *err);
/* Writer: the next sample of every channel begins a new run at start_ns of recording time, which
 * must not lie before the end of the last one. */
MUST_CHECK int growing_run(struct growing *growing, int64_t start_ns, struct err *err);

/* Reader: takes in what has come and lays it on case time by the pieces (copied); the traces, one
 * a channel, then stand still until the next refresh. */
MUST_CHECK int growing_refresh(struct growing *growing, const struct clock_map *map,
                               struct err *err);
/* Belongs to `growing`; trace_free() does nothing to it. */
struct trace *growing_trace(struct growing *growing, size_t channel);
/* Samples appended so far, which may be more than its trace has; any thread. */
int64_t growing_samples(struct growing *growing, size_t channel);

#endif
