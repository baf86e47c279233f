/*
 * store_impl.h - what the files of store/ share.
 */
#ifndef STORE_STORE_IMPL_H
#define STORE_STORE_IMPL_H

#include <jansson.h>
#include <sqlite3.h>

#include "base/arena.h"
#include "store/live.h"
#include "store/store.h"

enum { APPLICATION_ID = 0x494E4349 }; /* "INCI" */

struct store {
    sqlite3 *db;
    char *path, *rater;
    bool writable, newer;
    int64_t version; /* of the file's schema; an older one is only ever read */
    int64_t data_version;
    struct arena header_arena;
    struct case_header header;
    struct arena mark_arena; /* rebuilt when marks change */
    struct mark *marks;
    size_t mark_count, mark_room;
    bool marks_known;
    struct arena recording_arena;
    struct stored_recording *recordings;
    size_t recording_count, recording_room;
    bool recordings_known;
};

/* ---- sql.c ---- */

/* Fills err from the connection's last error, naming the file and what to do. */
int sql_error(struct store *store, int code, struct err *err);
MUST_CHECK int sql_run(struct store *store, const char *sql, struct err *err);
MUST_CHECK int sql_prepare(struct store *store, const char *sql, sqlite3_stmt **out,
                           struct err *err);
/* Steps a statement that gives no rows and finalises it, whatever happens. */
MUST_CHECK int sql_finish(struct store *store, sqlite3_stmt *statement, struct err *err);
/* One integer; `missing` when there is no row or NULL. */
MUST_CHECK int sql_integer(struct store *store, const char *sql, int64_t missing, int64_t *out,
                           struct err *err);
void sql_bind_time(sqlite3_stmt *statement, int index, int64_t ns); /* NS_NONE = NULL */
int64_t sql_column_time(sqlite3_stmt *statement, int column);       /* NULL = NS_NONE */
/* A copy in the arena, of every byte even when a NUL is among them; NULL when out of memory. */
MUST_CHECK char *sql_column_text(sqlite3_stmt *statement, int column, struct arena *arena);

/* BEGIN IMMEDIATE, after checking that the store may be written; COMMIT, or ROLLBACK when
 * `failed`, returning what went wrong first. */
MUST_CHECK int sql_begin(struct store *store, struct err *err);
MUST_CHECK int sql_end(struct store *store, int failed, struct err *err);

/* ---- history.c ---- */

/* d_i = BLAKE2b-256(d_{i-1} || row). */
void chain_next(const uint8_t previous[DIGEST_SIZE], const void *row, size_t size,
                uint8_t out[DIGEST_SIZE]);

struct history_entry {
    const char *action;
    int64_t object, step;
    const json_t *before, *after; /* NULL = "" */
    const char *why;
};

/* Appends one row, inside the caller's transaction. */
MUST_CHECK int history_append(struct store *store, const struct history_entry *entry,
                              struct err *err);
/* The number of a new step. */
MUST_CHECK int history_new_step(struct store *store, int64_t *out, struct err *err);
/* Recomputes the chain; ERR_CONFLICT names the first bad row. */
MUST_CHECK int history_check(struct store *store, int64_t *rows, int64_t *bad_seq,
                             uint8_t head[DIGEST_SIZE], struct err *err);

/* ---- mark_json.c ---- */

/* New reference, NULL when out of memory. */
json_t *mark_to_json(const struct mark *mark);
/* The members of `to` that differ from `from`, as they are in `from` and in `to`. */
MUST_CHECK int json_difference(json_t *from, json_t *to, json_t **before, json_t **after,
                               struct err *err);

/* ---- marks.c ---- */

void marks_forget(struct store *store);
/* Reads one mark into *out, its texts into `arena`. ERR_NOT_FOUND when there is none. */
MUST_CHECK int mark_load(struct store *store, int64_t id, struct arena *arena, struct mark *out,
                         struct err *err);
/* Inside the caller's transaction: one mark more, in a step; what differs between the stored mark
 * and `mark`, with its row, nothing when they are equal. */
MUST_CHECK int mark_add_inside(struct store *store, const struct mark *mark, int64_t step,
                               const char *why, int64_t *id, struct err *err);
MUST_CHECK int mark_change_inside(struct store *store, const struct mark *mark, const char *why,
                                  struct err *err);
/* Writes the fields of `fields` (as in mark_to_json) into the row of mark `id`. */
MUST_CHECK int mark_write(struct store *store, int64_t id, const json_t *fields, struct err *err);

/* ---- store.c ---- */

/* Fixes the epoch inside the caller's transaction. */
MUST_CHECK int epoch_fix_inside(struct store *store, int64_t epoch_civil_ns, struct err *err);
/* Takes the header in again. */
MUST_CHECK int header_reload(struct store *store, struct err *err);
/* The header as it is in the file now, its texts in `arena`. */
MUST_CHECK int header_read(struct store *store, struct arena *arena, struct case_header *out,
                           struct err *err);
json_t *header_to_json(const struct case_header *header);

/* ---- recordings.c ---- */

json_t *recording_to_json(const struct stored_recording *recording);
/* One recording more, inside the caller's transaction. */
MUST_CHECK int recording_add_inside(struct store *store, const struct stored_recording *recording,
                                    int64_t *id, struct err *err);

/* ---- sessions.c ---- */

/* New reference, NULL when out of memory. */
json_t *session_to_json(const struct live_session *session);
MUST_CHECK int session_begin_inside(struct store *store, const struct live_session *session,
                                    bool take_over, struct err *err);
/* Calls `each` for every session in order of beginning. */
MUST_CHECK int sessions_each(struct store *store,
                             int (*each)(int64_t id, const struct live_session *session,
                                         void *context, struct err *err),
                             void *context, struct err *err);

/* ---- streams.c ---- */

/* Recordings' clocks as JSON, for comparing with the history; new reference. */
MUST_CHECK int clocks_each(struct store *store,
                           int (*each)(int64_t recording, const char *clock, void *context,
                                       struct err *err),
                           void *context, struct err *err);

#endif
