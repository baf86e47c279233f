/*
 * overview.h - the min-max overview of a recording: extremes of blocks of samples, level on
 * level, so that any stretch of any length is drawn in constant time.
 *
 * Level 0 holds the extremes of OVERVIEW_BLOCK samples each, each further level of OVERVIEW_FAN
 * blocks of the one below. Built by background threads straight from the recording; kept in a
 * file beside the case (safe to delete; rebuilt when the recording's digest or size differ, or when
 * its own digest does not match), and usable while it is being built or checked: what is not there
 * yet is said to be missing, never zero.
 *
 * Threads: overview_minmax() may be called from any thread while the builders run.
 */
#ifndef TRACE_OVERVIEW_H
#define TRACE_OVERVIEW_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "base/err.h"
#include "base/progress.h"
#include "recording/recording.h"

enum { OVERVIEW_BLOCK = 256, OVERVIEW_FAN = 16, OVERVIEW_LEVELS = 3 };

struct overview;

/* Loads `path` when it fits the recording (`digest` is the recording's, stored in the file);
 * otherwise starts `threads` builders, which write `path` when done. `path` NULL = memory only.
 * The recording must outlive the overview. */
MUST_CHECK int overview_open(const struct recording *recording, const char *digest,
                             const char *path, int threads, struct overview **out, struct err *err);

/* Stops the builders, waits for them, frees. */
void overview_close(struct overview *overview);

enum overview_answer {
    OVERVIEW_EXACT,   /* low and high are the extremes of exactly these samples */
    OVERVIEW_PENDING, /* not built yet */
};

/* Extremes of samples [first, first + count) of a channel; NaN when all are missing. Ends that do
 * not fall on a block are read from the recording itself (at most 2 * OVERVIEW_BLOCK samples). */
enum overview_answer overview_minmax(const struct overview *overview, size_t channel, int64_t first,
                                     int64_t count, float *low, float *high);

/* done == total when finished. A failure of a builder or of writing is in *why (code 0 = none). */
void overview_progress(const struct overview *overview, int64_t *done, int64_t *total,
                       struct err *why);
/* Waits for the builders (tests, `frame`). */
void overview_wait(struct overview *overview);

#endif
