/*
 * saver_thread.c - the thread that saves: one change after the other, the second place while the
 * case fails, and looking at what others changed while there is nothing to do.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include "store/saver_impl.h"
#include "store/store_impl.h"

enum { ROUNDS_BEFORE_CHECKPOINT = 6, LONGEST_PAUSE = 20 };
static const int64_t idle_ns = 500 * NS_PER_MS;

/* Waits for something to do, at most so long. With the lock. */
static void wait_for(struct saver *saver, int64_t span_ns)
{
    struct timespec until = {0};
    (void)clock_gettime(CLOCK_MONOTONIC, &until);
    int64_t ns = until.tv_sec * NS_PER_S + until.tv_nsec + span_ns;
    until = (struct timespec){ns / NS_PER_S, ns % NS_PER_S};
    (void)pthread_cond_timedwait(&saver->wake, &saver->lock, &until);
}

static void set_why(char *to, size_t size, const struct err *err)
{
    (void)snprintf(to, size, "%.*s", (int)size - 1, err->text);
}

/* Bringing the log into the file costs further flushes: never between a key and its commit, but
 * when all is quiet. */
static void own_checkpoints(struct saver *saver)
{
    (void)sqlite3_wal_autocheckpoint(saver->store->db, 0);
}

/* Another file of the same case may stand where the old one was (put back from a copy): goes on
 * with that one. Without the lock. */
static void take_file_anew(struct saver *saver)
{
    struct store *fresh = NULL;
    char old_id[CASE_ID_SIZE], new_id[CASE_ID_SIZE];
    if (store_case_id(saver->store, old_id, NULL) ||
        store_open(saver->path, STORE_WRITE, saver->session.rater, &fresh, NULL))
        return;
    if (store_case_id(fresh, new_id, NULL) == ERR_OK && strcmp(old_id, new_id) == 0) {
        store_close(saver->store);
        saver->store = fresh;
        own_checkpoints(saver);
    } else {
        store_close(fresh);
    }
}

static int not_in_place(struct saver *saver, struct err *err)
{
    return err_set(err, ERR_NOT_FOUND, "%s: the case was moved or removed; put it back",
                   saver->path);
}

/* Tries one change. Without the lock. A file that was moved or removed takes what it is given and
 * nobody finds it again: looked at before and after. */
static int try_one(struct saver *saver, const struct live_change *change, int64_t *id,
                   struct err *err)
{
    if (!store_in_place(saver->store))
        return not_in_place(saver, err);
    int failed = store_live_change(saver->store, &saver->session, change, id, err);
    if (!failed && !store_in_place(saver->store))
        failed = not_in_place(saver, err);
    return failed;
}

/* Everything that is in neither place goes to the second one. Called and left with the lock, which
 * is given up for each write. */
static void keep_waiting(struct saver *saver)
{
    struct err err = {0};
    int failed = ERR_OK;
    if (saver->kept < saver->saved)
        saver->kept = saver->saved;
    while (!failed && saver->kept < saver->asked) {
        const struct live_change *change = &saver->changes[saver->kept]->change;
        (void)pthread_mutex_unlock(&saver->lock);
        failed = second_place_put(saver->place, change, &err);
        (void)pthread_mutex_lock(&saver->lock);
        saver->kept += !failed;
    }
    saver->second_why[0] = '\0';
    if (failed)
        set_why(saver->second_why, sizeof saver->second_why, &err);
}

/* All is in the case: what lay in the second place has done its work. */
static void clear_second_place(struct saver *saver)
{
    struct err err = {0};
    (void)pthread_mutex_unlock(&saver->lock);
    /* One that cannot be removed is taken in again at the next start, and changes nothing. */
    int failed = second_place_clear(saver->place, &err);
    (void)pthread_mutex_lock(&saver->lock);
    saver->second_why[0] = '\0';
    if (failed)
        set_why(saver->second_why, sizeof saver->second_why, &err);
}

/* What was saved went with the file: all of it goes to the second place, and waits. Once: as long
 * as the file stays away it lies there. What was noted of streams is noted again, too. */
static void all_wait_again(struct saver *saver)
{
    if (saver->saved > 0)
        saver->saved = saver->kept = 0;
    saver->failing = saver->asked > 0;
    for (size_t i = 0; i < saver->stream_count; i++)
        saver->streams[i].dirty = true;
}

/* Saves the first change that waits; false when that failed. With the lock. */
static bool save_next(struct saver *saver)
{
    struct err err = {0};
    struct queued_change *next = saver->changes[saver->saved];
    int64_t id = 0;
    (void)pthread_mutex_unlock(&saver->lock);
    int failed = try_one(saver, &next->change, &id, &err);
    int64_t now = boottime_now_ns();
    (void)pthread_mutex_lock(&saver->lock);
    saver->failing = failed != ERR_OK;
    saver->why[0] = '\0';
    saver->quiet_rounds = 0;
    if (failed) {
        set_why(saver->why, sizeof saver->why, &err);
        return false;
    }
    next->mark_id = id;
    next->durable_ns = now;
    saver->saved++;
    if (saver->saved == saver->asked) {
        saver->kept = saver->saved;
        clear_second_place(saver);
    }
    return true;
}

/* ---- while there is nothing to save ---- */

/* The marks as they are now, for the screen. Without the lock but for the exchange. */
static void publish_marks(struct saver *saver)
{
    struct arena arena = {0};
    const struct mark *marks;
    size_t count;
    if (store_marks(saver->store, &marks, &count, NULL))
        return;
    struct mark *copy;
    if (marks_copy(marks, count, &arena, &copy, NULL)) {
        arena_free(&arena); /* memory is short: the next look may do better */
        return;
    }
    (void)pthread_mutex_lock(&saver->lock);
    saver->marks_as_of = (int64_t)saver->saved; /* this thread's: none was saved meanwhile */
    arena_free(&saver->marks_arena);
    saver->marks_arena = arena;
    saver->marks = copy;
    saver->mark_count = count;
    saver->marks_new = true;
    (void)pthread_mutex_unlock(&saver->lock);
}

/* Stream rows that changed. A failure is no matter for marks: it is tried again at the next look.
 */
static void keep_streams(struct saver *saver)
{
    for (size_t i = 0; i < saver->stream_count; i++) {
        if (!saver->streams[i].dirty)
            continue;
        struct err err = {0};
        struct stored_stream stream = saver->streams[i].stream;
        char *clock = strdup(stream.clock);
        if (!clock)
            return;
        stream.clock = clock;
        saver->streams[i].dirty = false;
        (void)pthread_mutex_unlock(&saver->lock);
        int failed = store_stream_keep(saver->store, &stream, &err);
        free(clock);
        (void)pthread_mutex_lock(&saver->lock);
        if (failed) {
            saver->streams[i].dirty = true;
            set_why(saver->stream_why, sizeof saver->stream_why, &err);
            return;
        }
    }
}

/* With the lock, given up for the work. */
static void look_around(struct saver *saver)
{
    (void)pthread_mutex_unlock(&saver->lock);
    bool in_place = store_in_place(saver->store);
    if (in_place && store_refresh(saver->store))
        publish_marks(saver);
    if (in_place && ++saver->quiet_rounds == ROUNDS_BEFORE_CHECKPOINT)
        (void)sqlite3_wal_checkpoint_v2(saver->store->db, NULL, SQLITE_CHECKPOINT_PASSIVE, NULL,
                                        NULL);
    (void)pthread_mutex_lock(&saver->lock);
    if (in_place) {
        keep_streams(saver);
    } else {
        struct err err = {0};
        if (not_in_place(saver, &err))
            set_why(saver->asked > 0 ? saver->why : saver->stream_why, sizeof saver->why, &err);
        all_wait_again(saver);
    }
}

/* ---- the thread ---- */

static bool finished(const struct saver *saver)
{
    bool all = saver->saved == saver->asked && !saver_stream_waiting(saver);
    return saver->stop && (all || boottime_now_ns() >= saver->give_up_boottime_ns);
}

/* What was saved is in the file that was there then: another one, or none, does not have it. With
 * the lock, given up for the work. */
static void look_for_file(struct saver *saver)
{
    (void)pthread_mutex_unlock(&saver->lock);
    bool in_place = store_in_place(saver->store);
    if (!in_place)
        take_file_anew(saver);
    (void)pthread_mutex_lock(&saver->lock);
    if (!in_place)
        all_wait_again(saver);
}

/* One round: what is to be saved, or a look around. Returns the pause before the next attempt. */
static int64_t one_round(struct saver *saver, int64_t pause_ns)
{
    look_for_file(saver);
    if (saver->saved == saver->asked) {
        look_around(saver);
        return saver->first_pause_ns;
    }
    if (save_next(saver))
        return saver->first_pause_ns;
    keep_waiting(saver);
    int64_t until = boottime_now_ns() + pause_ns;
    for (int64_t now = boottime_now_ns(); now < until && !finished(saver);
         now = boottime_now_ns()) {
        wait_for(saver, saver->stop ? saver->first_pause_ns : until - now);
        keep_waiting(saver); /* a change that came meanwhile */
    }
    int64_t longest_ns = LONGEST_PAUSE * saver->first_pause_ns;
    return pause_ns * 2 < longest_ns ? pause_ns * 2 : longest_ns;
}

void *saver_thread(void *context)
{
    struct saver *saver = context;
    int64_t pause_ns = saver->first_pause_ns;
    own_checkpoints(saver);
    (void)pthread_mutex_lock(&saver->lock);
    while (!finished(saver)) {
        if (saver->saved == saver->asked && !saver->woken)
            wait_for(saver, saver->stop ? saver->first_pause_ns : idle_ns);
        saver->woken = false;
        pause_ns = one_round(saver, pause_ns);
    }
    if (saver->saved == saver->asked)
        look_around(saver);
    (void)pthread_mutex_unlock(&saver->lock);
    /* A session that could not be ended here is by the next one, which sees that nobody runs it. */
    int ended = saver->saved == saver->asked
                    ? store_session_end(saver->store, saver->session.uid, NULL)
                    : ERR_OK;
    (void)ended;
    return NULL;
}
