/*
 * saver.h - a thread that saves a live session's changes of marks in order, and loses none.
 *
 * A change is queued in no time; the thread writes it to the case (WAL, synchronous FULL). While
 * the case cannot be written - disk full, read-only, moved, removed, locked, I/O error - every
 * change that waits goes to the second place, the reason is told, and the thread tries again, with
 * a growing pause, for ever. Where the file was moved or removed under the session, all its changes
 * wait again until it is back.
 *
 * All functions are for the thread that started the saver. The store belongs to the saver's thread
 * from saver_start() to saver_stop().
 */
#ifndef STORE_SAVER_H
#define STORE_SAVER_H

#include "store/live.h"

struct saver;

/* Takes the store over on success. The session need not be in the case yet. pause_ms is the first
 * pause between attempts, which doubles up to 20 times as much. */
enum { SAVER_PAUSE_MS = 250 };
MUST_CHECK int saver_start(struct store *store, const struct live_session *session, int pause_ms,
                           struct saver **out, struct err *err);

/* Queues a change; texts are copied. Sets *number, by which the change, and the mark that a
 * LIVE_ADD makes, are known from then on. Only memory can fail. */
MUST_CHECK int saver_change(struct saver *saver, const struct live_change *change, int64_t *number,
                            struct err *err);

/* What is known of a stream by now, to be kept when there is time. */
MUST_CHECK int saver_stream(struct saver *saver, const struct stored_stream *stream,
                            struct err *err);

struct saver_status {
    int64_t asked, saved; /* numbers: changes up to `saved` are durable in the case */
    int64_t kept;         /* changes up to this one are durable in the second place or the case */
    bool failing;         /* asked > saved because the last attempt failed */
    char why[320];        /* of the last failure, one line; "" when not failing */
    char second_why[320]; /* why the second place fails too; "" when it does not */
};
void saver_status(struct saver *saver, struct saver_status *out);

/* Id of the mark that a number was about; 0 while it is not saved. */
int64_t saver_mark_id(struct saver *saver, int64_t number);
/* When it was durable in the case, on CLOCK_BOOTTIME; NS_NONE while it is not. */
int64_t saver_durable_ns(struct saver *saver, int64_t number);

/* When others changed marks since the last call: calls `each` for every mark there is (valid
 * during the call) and returns true. They were read when the session's changes up to number `as_of`
 * were in the case, and may be older than what is saved by now. */
bool saver_marks(struct saver *saver,
                 void (*each)(const struct mark *mark, int64_t as_of, void *context),
                 void *context);

/* Waits at most wait_ms for what is not saved, ends the session in the case, stops the thread and
 * hands the store back. Says in err (ERR_IO) how many changes are not in the case and where they
 * are; *store is handed back all the same. Frees the saver. */
MUST_CHECK int saver_stop(struct saver *saver, int wait_ms, struct store **store, struct err *err);

#endif
