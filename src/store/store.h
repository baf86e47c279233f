/*
 * store.h - one case on disk: an SQLite file with its recordings, marks and whole history.
 *
 * Invariants
 *   1. `history` is append-only (triggers refuse UPDATE and DELETE) and hash-chained: row i holds
 *      BLAKE2b-256(digest of row i-1 || canonical bytes of row i), so that any later edit shows.
 *   2. Current state (case, recordings, marks) is written in the same transaction as the history
 *      row that explains it; either both are on disk or neither.
 *   3. Undo and redo are new history rows. A deleted mark is a mark in state MARK_REJECTED.
 *   4. A stamp is written once and never changed; a moved mark has another onset.
 *   5. A file of a newer program opens read-only, or fails with ERR_NEWER when writing is asked.
 *
 * File mode 0600, WAL, synchronous FULL, STRICT tables, foreign keys. Times are case time unless
 * the name says otherwise. One store per thread.
 */
#ifndef STORE_STORE_H
#define STORE_STORE_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "base/arena.h"
#include "base/err.h"
#include "base/file.h"
#include "base/ns.h"

struct store;

enum store_mode { STORE_READ, STORE_WRITE };

/* What `start` records about the case. Texts are copied; NULL = "". */
struct case_header {
    const char *subject;   /* study code of the subject, never a name */
    const char *procedure; /* operation */
    const char *rater;     /* who marks */
    const char *codebook_text;
    size_t codebook_size;
    int64_t epoch_civil_ns; /* case time 0 on the theatre's wall clock; NS_NONE = not fixed yet */
    int utc_offset_s;       /* wall clock minus UTC */
};

/* Creates the file; one that exists is refused. */
MUST_CHECK int store_create(const char *path, const struct case_header *header, struct err *err);

/* `rater` is whose changes these are (NULL: the case's own). */
MUST_CHECK int store_open(const char *path, enum store_mode mode, const char *rater,
                          struct store **out, struct err *err);
void store_close(struct store *store);

/* Valid until the next store_epoch_fix() or store_close(). */
const struct case_header *store_header(const struct store *store);
const char *store_path(const struct store *store);
bool store_writable(const struct store *store);
/* Made by a newer program: it can be read as far as this one understands it. */
bool store_newer(const struct store *store);

/* Fixes the epoch, once; a second time is ERR_CONFLICT. */
MUST_CHECK int store_epoch_fix(struct store *store, int64_t epoch_civil_ns, struct err *err);

/* ---- recordings ---- */

struct stored_recording {
    int64_t id;
    const char *path; /* as attached, absolute */
    int64_t size;
    int64_t modified_ns; /* the file's time of last change when its digest was last taken; while
                            it and the size stand, the digest need not be taken again */
    char digest[DIGEST_TEXT_SIZE];
    const char *options;    /* reader options, one "name=value" a line; "" */
    int64_t start_civil_ns; /* of the recording's own clock; NS_NONE = file says none */
};

/* Sets *id. The same digest twice is ERR_CONFLICT. */
MUST_CHECK int store_recording_add(struct store *store, const struct stored_recording *recording,
                                   int64_t *id, struct err *err);
/* The same file by its digest, found at `path` (maybe elsewhere than before) with another time of
 * last change. A new path is a history row; a new time alone is not, as nothing was changed. */
MUST_CHECK int store_recording_found(struct store *store, int64_t id, const char *path,
                                     int64_t modified_ns, struct err *err);
/* Array in attach order, valid until the next change of recordings or store_close(). */
MUST_CHECK int store_recordings(struct store *store, const struct stored_recording **out,
                                size_t *count, struct err *err);

/* ---- marks ---- */

enum mark_state {
    MARK_INCOMPLETE, /* a value, unit or end that its code asks for is still missing */
    MARK_MARKED,     /* as entered */
    MARK_CONFIRMED,  /* looked at in review and found right */
    MARK_REJECTED,   /* taken back: kept, not exported unless asked */
};

enum mark_source { MARK_LIVE, MARK_REVIEW, MARK_COMMAND, MARK_IMPORT };

struct mark {
    int64_t id; /* 0 for one that is not stored yet */
    const char *code;
    int64_t onset_ns;
    int64_t until_ns; /* NS_NONE: a point, or a span still open */
    bool has_value;
    double value;
    const char *unit, *route, *note; /* "" when none */
    enum mark_state state;
    enum mark_source source;
    const char *rater;
    int64_t error_ns; /* standard uncertainty of the onset as entered; 0 = not stated */
    /* The stamp: set when added, never changed. */
    const char *stamp_clock; /* "" = typed, not stamped; else clock name with boot id */
    int64_t stamp_ns;        /* on that clock; NS_NONE when typed */
    int64_t stamp_utc_ns;    /* wall clock at entry; set by store_mark_add() when NS_NONE */
};

const char *mark_state_name(enum mark_state state);
bool mark_state_from_name(const char *name, enum mark_state *out);
const char *mark_source_name(enum mark_source source);

/* Adds one (rater NULL = the store's), sets *id. `why` may be "". */
MUST_CHECK int store_mark_add(struct store *store, const struct mark *mark, const char *why,
                              int64_t *id, struct err *err);
/* Adds many in one transaction and one undo step (import). */
MUST_CHECK int store_mark_add_all(struct store *store, const struct mark *marks, size_t count,
                                  const char *why, struct err *err);
/* Replaces the changeable fields of mark->id (code, onset, until, value, unit, route, note,
 * state, error). No row is written when nothing differs. */
MUST_CHECK int store_mark_change(struct store *store, const struct mark *mark, const char *why,
                                 struct err *err);

/* All marks, rejected ones too, by onset then id. Valid until the next change of marks (by this
 * store; store_refresh() tells of others') or store_close(). */
MUST_CHECK int store_marks(struct store *store, const struct mark **out, size_t *count,
                           struct err *err);
/* Copies of marks, texts and all, in `arena`. */
MUST_CHECK int marks_copy(const struct mark *marks, size_t count, struct arena *arena,
                          struct mark **out, struct err *err);
/* True when another connection changed the file since the last call. */
bool store_refresh(struct store *store);

/* Undoes the last step that is not undone yet, or redoes the last one undone, whatever marks it
 * touched; writes new history rows. *done = false when there is nothing to undo or redo.
 * `what` (may be NULL) gets one line: "add incision at +00:12:03.250". */
MUST_CHECK int store_undo(struct store *store, bool *done, char *what, size_t size,
                          struct err *err);
MUST_CHECK int store_redo(struct store *store, bool *done, char *what, size_t size,
                          struct err *err);

/* Free-standing history rows: opening for review, export with its recipe's digest. */
MUST_CHECK int store_log(struct store *store, const char *action, const char *detail,
                         struct err *err);

/* ---- history ---- */

struct history_row {
    int64_t seq; /* 1, 2, 3, ... */
    int64_t utc_ns;
    const char *rater;
    const char *program;        /* "incisura 0.1.0" */
    const char *action;         /* "create", "attach", "mark-add", "mark-change", "undo", ... */
    int64_t object;             /* id of the mark or recording; 0 = the case */
    const char *before, *after; /* JSON objects of the changed fields; "" when none */
    const char *why;
    char digest[DIGEST_TEXT_SIZE];
};

/* Calls `each` for every row in order; stops when it returns non-zero and returns that. */
MUST_CHECK int store_history(struct store *store,
                             int (*each)(const struct history_row *row, void *context),
                             void *context, struct err *err);

/* Recomputes the chain, and compares current state with what the history says it is. On a
 * mismatch: ERR_CONFLICT, text naming the first bad row (or mark), *bad_seq = its number (0 when
 * the state, not a row, is off). `head` (may be NULL) gets the last digest. */
MUST_CHECK int store_verify(struct store *store, int64_t *rows, int64_t *bad_seq,
                            char head[DIGEST_TEXT_SIZE], struct err *err);

#endif
