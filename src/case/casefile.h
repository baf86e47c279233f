/*
 * casefile.h - an open case: its store, codebook, recordings, clocks and traces brought together.
 *
 * What the screen, the exporter and the commands work on. Also opens a bare recording as a case
 * without a store, so that `derive` and `frame` work on a file.
 *
 * Owns everything it hands out. One thread at a time; traces may be read from any thread.
 */
#ifndef CASE_CASEFILE_H
#define CASE_CASEFILE_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "base/err.h"
#include "base/progress.h"
#include "codebook/codebook.h"
#include "physiology/derivation.h"
#include "recording/recording.h"
#include "store/store.h"
#include "timeline/clock_map.h"
#include "trace/overview.h"
#include "trace/trace.h"
#include "trace/train.h"

struct casefile;

/* One attached recording. */
struct attached {
    int64_t id; /* of the store; 0 for a bare file */
    const struct recording_info *info;
    const struct recording *recording;
    struct clock_map map;
    const char *digest;        /* "" for a bare file */
    const char *problem;       /* "" or why its signals cannot be read: moved, changed */
    struct overview *overview; /* NULL until casefile_overviews() */
};

/* Opens `path`: a case, or a bare recording (mode must be STORE_READ then). `rater` as in
 * store_open(). A recording that is not where it was is looked for beside the case and found by
 * its digest; one that cannot be read makes its `problem`, not an error. */
MUST_CHECK int casefile_open(const char *path, enum store_mode mode, const char *rater,
                             const struct reader_options *bare, struct casefile **out,
                             struct err *err);
void casefile_close(struct casefile *casefile);

/* Digests and attaches a recording; fixes the epoch when it is the first. */
MUST_CHECK int casefile_attach(struct casefile *casefile, const char *path,
                               const struct reader_options *options, struct progress *progress,
                               struct err *err);

const char *casefile_name(const struct casefile *casefile); /* "S-204" of "/x/S-204.case" */
const char *casefile_path(const struct casefile *casefile);
struct store *casefile_store(struct casefile *casefile); /* NULL for a bare recording */
/* Hands the store over to the caller, who closes it; the case goes on without one. */
struct store *casefile_release_store(struct casefile *casefile);
const struct codebook *casefile_codebook(const struct casefile *casefile);
int64_t casefile_epoch_civil_ns(const struct casefile *casefile); /* NS_NONE: not fixed yet */
int casefile_utc_offset_s(const struct casefile *casefile);

size_t casefile_recording_count(const struct casefile *casefile);
const struct attached *casefile_recording(const struct casefile *casefile, size_t index);

/* Channels of all readable recordings, as traces on case time, in attach then file order. A label
 * that occurs in two recordings keeps its plain name in the first, and is "LABEL @2" in the
 * second; but parts of one live source with the same label, unit and rate are one trace, by the
 * name of the first. */
size_t casefile_channel_count(const struct casefile *casefile);
const struct trace *casefile_channel(const struct casefile *casefile, size_t index);
/* By name: exact, then any letter case; NULL when there is none, or when a recording attached
 * before the one that has it cannot be read: names would shift. */
const struct trace *casefile_channel_find(const struct casefile *casefile, const char *name);

/* First and last instant of all recordings and marks; both 0 for an empty case. */
void casefile_extent(const struct casefile *casefile, int64_t *from_ns, int64_t *to_ns);

/* Starts (or loads) the overviews, kept beside the case; channel traces then answer
 * trace_minmax() from them where they are built. */
MUST_CHECK int casefile_overviews(struct casefile *casefile, int threads, struct err *err);

/* Extremes of a stretch of a channel, if they can be had in constant time (by overview, or because
 * it is short); false = still being built. */
bool casefile_minmax(const struct casefile *casefile, const struct trace *trace, int64_t first,
                     int64_t count, float *low, float *high);

/* Derives: `channel` names the input (NULL: by role; ERR_USAGE when that is none or, for methods
 * that take one, when it is not the only one). settings are "k=v". Result is cached in the
 * casefile, which owns it; the same request gives the same pointer. */
MUST_CHECK int casefile_derive(struct casefile *casefile, const char *name, const char *channel,
                               const char *const *settings, size_t setting_count,
                               struct progress *progress, const struct derived **out,
                               struct err *err);

/* The case time of a typed time; ERR_USAGE when the epoch is not fixed and the time needs it. */
MUST_CHECK int casefile_time(const struct casefile *casefile, const char *text, int64_t *out_ns,
                             struct err *err);

#endif
