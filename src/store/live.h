/*
 * live.h - what a live session keeps in a case: the session itself, which is also the lock against
 * a second one, its changes of marks, each done once however often it is tried, and the streams it
 * takes in.
 *
 * A change is asked for by (session, number). Where it was tried and nobody knows whether it
 * reached the disk, it is tried again; the store knows.
 */
#ifndef STORE_LIVE_H
#define STORE_LIVE_H

#include "base/arena.h"
#include "base/machine.h"
#include "store/store.h"

/* ---- sessions ---- */

struct live_session {
    char uid[RANDOM_ID_SIZE];
    char host[HOST_SIZE], machine[MACHINE_ID_SIZE], boot_id[BOOT_ID_SIZE];
    int64_t pid, process_start;
    char rater[64];
    int64_t begun_utc_ns;
    int64_t
        epoch_civil_ns; /* case time 0 as this session takes it; fixed with it when it was not */
    int64_t case_minus_boottime_ns;
    int64_t tie_error_ns;
    int64_t ended_utc_ns; /* NS_NONE while it runs */
};

/* Is the process that began it still there? One of another machine is taken to be. */
bool live_session_alive(const struct live_session *session);

/* Writes the session; one that is written already is left as it is. ERR_CONFLICT names a session
 * that runs (unless `take_over`); ones whose process is gone are ended here. */
MUST_CHECK int store_session_begin(struct store *store, const struct live_session *session,
                                   bool take_over, struct err *err);
MUST_CHECK int store_session_end(struct store *store, const char *uid, struct err *err);
/* The newest session; *any = false when there was none. */
MUST_CHECK int store_session_last(struct store *store, struct live_session *out, bool *any,
                                  struct err *err);

/* Does the session with this uid still run? */
MUST_CHECK int store_session_runs(struct store *store, const char *uid, bool *out, struct err *err);

/* ---- changes ---- */

enum live_change_kind { LIVE_ADD, LIVE_CHANGE };

struct live_change {
    int64_t number; /* 1, 2, 3, ... within the session */
    enum live_change_kind kind;
    struct mark mark;  /* of a change: the whole mark as it shall be; its id is not looked at */
    int64_t of_number; /* LIVE_CHANGE: the mark that this number of the session added, or */
    int64_t of_id;     /* the mark with this id */
    const char *why;
};

/* Adds or changes a mark, begins the session where that has not been possible yet, and notes the
 * number, in one transaction. Sets *id to the mark's. Times are moved when the session took another
 * epoch than the case has by now. */
MUST_CHECK int store_live_change(struct store *store, const struct live_session *session,
                                 const struct live_change *change, int64_t *id, struct err *err);

/* Is the file still where it was opened? false: moved, removed, or another stands in its place. */
bool store_in_place(struct store *store);

/* 32 digits that tell this case from any other, wherever its file is. */
enum { CASE_ID_SIZE = 33 };
MUST_CHECK int store_case_id(struct store *store, char out[CASE_ID_SIZE], struct err *err);

/* ---- streams and clocks ---- */

struct stored_stream {
    const char *path, *session, *source;
    const char *clock; /* timeline/clock_text.h; the store does not look into it. "" = none */
};

/* Writes a stream's row, or what has changed of it. No history: it is not part of the case yet. */
MUST_CHECK int store_stream_keep(struct store *store, const struct stored_stream *stream,
                                 struct err *err);
/* Streams that are no recordings yet; everything lives in `arena`. */
MUST_CHECK int store_streams(struct store *store, struct arena *arena, struct stored_stream **out,
                             size_t *count, struct err *err);
/* Makes a stream's file a recording with its clock, in one transaction. */
MUST_CHECK int store_stream_attach(struct store *store, const struct stored_stream *stream,
                                   const struct stored_recording *recording, int64_t *id,
                                   struct err *err);
/* Drops the row of a stream that left no file. */
MUST_CHECK int store_stream_drop(struct store *store, const char *path, struct err *err);

/* The source that a recording streamed from, in `arena`; "" when it did not stream. */
MUST_CHECK int store_stream_source(struct store *store, int64_t recording, struct arena *arena,
                                   const char **out, struct err *err);

/* The clock of a recording as text in `arena`; "" when it has none. */
MUST_CHECK int store_clock(struct store *store, int64_t recording, struct arena *arena,
                           const char **out, struct err *err);

#endif
