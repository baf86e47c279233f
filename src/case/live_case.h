/*
 * live_case.h - a live session's place in its case: the clock it counts on, what an earlier session
 * left behind, and streams that become recordings.
 */
#ifndef CASE_LIVE_CASE_H
#define CASE_LIVE_CASE_H

#include "case/casefile.h"
#include "case/live_stream.h"
#include "store/live.h"
#include "store/saver.h"

/* A new session of a case opened for writing. Its clock: that of the last session when the machine
 * has not been started again since; else the wall clock, to which the case's start ties it (with an
 * uncertainty when an earlier session was on another boot). A case without a start gets now. Writes
 * nothing. `tie` gets one line for people when the monotonic clock began anew, "" else. */
MUST_CHECK int live_case_session(struct casefile *casefile, const char *rater,
                                 struct live_session *out, char *tie, size_t size, struct err *err);

/* Tells the saver which files a stream writes and how its clock runs, for the store to keep. */
MUST_CHECK int live_case_keep(struct saver *saver, struct live_stream *stream, const char *source,
                              struct err *err);

/* Streams of sessions that are over become recordings: the file is closed as a crash left it open,
 * digested, attached with its clock. Files larger than `most_bytes` are left for later. *attached
 * counts them. A file that is gone or empty is forgotten. */
MUST_CHECK int live_case_adopt(struct store *store, int64_t most_bytes, int64_t *attached,
                               struct err *err);

/* What was left behind and is in the case now. */
struct settled {
    int64_t changes, damaged; /* from the second place: brought in, not readable */
    int64_t recordings;       /* streams that became recordings */
    int64_t strays; /* files by the name of a stream of this case that it does not know: written in
                       the moment before a kill, or while the case could not be */
};

/* What lies in the second place, live_case_adopt(), and a look for strays, which are not touched:
 * only a person can say whose they are. */
MUST_CHECK int live_case_settle(struct store *store, int64_t most_bytes, struct settled *out,
                                struct err *err);

#endif
