/*
 * saver_impl.h - the saver's state, shared by its queue (saver.c) and its thread (saver_thread.c).
 */
#ifndef STORE_SAVER_IMPL_H
#define STORE_SAVER_IMPL_H

#include <pthread.h>

#include "store/saver.h"
#include "store/second_place.h"

/* A change and what became of it. Texts live in the saver's arena. */
struct queued_change {
    struct live_change change;
    int64_t mark_id, durable_ns;
};

struct queued_stream {
    struct stored_stream stream; /* texts are malloc'd */
    bool dirty;
};

struct saver {
    pthread_t thread;
    pthread_mutex_t lock; /* guards everything below it but `store` and `place` */
    pthread_cond_t wake;
    struct live_session session;
    struct store *store;        /* the thread's */
    struct second_place *place; /* the thread's */
    char *path;
    int64_t first_pause_ns;
    int quiet_rounds; /* the thread's: looks around since something was saved */

    struct arena arena;
    struct queued_change **changes; /* shape (asked); number n at [n - 1]; never taken out */
    size_t asked, room;
    size_t saved, kept;
    struct queued_stream *streams;
    size_t stream_count, stream_room;
    bool woken; /* something was asked since the thread last looked */
    bool stop;
    int64_t give_up_boottime_ns; /* after stop: when to end although something is not saved */
    bool failing;
    char why[320], second_why[320], stream_why[320];

    struct arena marks_arena; /* what others changed, as last read */
    const struct mark *marks; /* shape (mark_count) */
    size_t mark_count;
    int64_t marks_as_of; /* they hold the session's changes up to this number */
    bool marks_new;
};

/* The first stream whose row is not in the case as it should be; NULL = none. With the lock. */
const struct queued_stream *saver_stream_waiting(const struct saver *saver);

void *saver_thread(void *context);

#endif
