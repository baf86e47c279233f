/*
 * saver.c - the queue's side of the saver: what the screen's thread asks and is told. Writes
 * nothing to disk.
 */
#include "store/saver.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include "base/array.h"
#include "store/saver_impl.h"

static void saver_free(struct saver *saver)
{
    for (size_t i = 0; i < saver->stream_count; i++) {
        free((char *)(uintptr_t)saver->streams[i].stream.path);
        free((char *)(uintptr_t)saver->streams[i].stream.source);
        free((char *)(uintptr_t)saver->streams[i].stream.clock);
    }
    free(saver->streams);
    free(saver->changes);
    free(saver->path);
    arena_free(&saver->arena);
    arena_free(&saver->marks_arena);
    second_place_free(saver->place);
    (void)pthread_mutex_destroy(&saver->lock);
    (void)pthread_cond_destroy(&saver->wake);
    free(saver);
}

/* With the lock. A thread that is at work hears no signal: it looks at `woken`. */
static void wake(struct saver *saver)
{
    saver->woken = true;
    (void)pthread_cond_signal(&saver->wake);
}

/* Timed waits go by a clock that nobody sets. */
static void init_wake(pthread_cond_t *wake)
{
    pthread_condattr_t attributes;
    (void)pthread_condattr_init(&attributes);
    (void)pthread_condattr_setclock(&attributes, CLOCK_MONOTONIC);
    (void)pthread_cond_init(wake, &attributes);
    (void)pthread_condattr_destroy(&attributes);
}

int saver_start(struct store *store, const struct live_session *session, int pause_ms,
                struct saver **out, struct err *err)
{
    char id[CASE_ID_SIZE];
    struct saver *made = calloc(1, sizeof *made);
    if (!made)
        return err_memory(err, "the saver");
    (void)pthread_mutex_init(&made->lock, NULL);
    init_wake(&made->wake);
    made->session = *session;
    made->store = store;
    made->first_pause_ns = pause_ms * NS_PER_MS;
    made->path = strdup(store_path(store));
    int failed = made->path ? store_case_id(store, id, err) : err_memory(err, "the saver");
    if (!failed)
        failed = second_place_new(id, made->path, session, &made->place, err);
    if (!failed && pthread_create(&made->thread, NULL, saver_thread, made) != 0)
        failed = err_set(err, ERR_MEMORY, "cannot start a thread for saving");
    if (failed)
        saver_free(made);
    else
        *out = made;
    return failed;
}

static int copy_texts(struct saver *saver, struct live_change *change, struct err *err)
{
    struct mark *mark = &change->mark;
    const char **texts[] = {&mark->code,  &mark->unit,        &mark->route, &mark->note,
                            &mark->rater, &mark->stamp_clock, &change->why};
    for (size_t i = 0; i < sizeof texts / sizeof *texts; i++) {
        *texts[i] = arena_string(&saver->arena, *texts[i] ? *texts[i] : "");
        if (!*texts[i])
            return err_memory(err, "a change");
    }
    return ERR_OK;
}

static int queue(struct saver *saver, const struct live_change *change, int64_t *number,
                 struct err *err)
{
    int failed = array_reserve((void **)&saver->changes, &saver->room, saver->asked + 1,
                               sizeof(struct queued_change *), err);
    struct queued_change *made = failed ? NULL : arena_alloc(&saver->arena, 1, sizeof *made);
    if (!failed && !made)
        failed = err_memory(err, "a change");
    if (failed)
        return failed;
    *made = (struct queued_change){*change, 0, NS_NONE};
    failed = copy_texts(saver, &made->change, err);
    if (failed)
        return failed;
    made->change.number = (int64_t)saver->asked + 1;
    saver->changes[saver->asked++] = made;
    *number = made->change.number;
    return ERR_OK;
}

int saver_change(struct saver *saver, const struct live_change *change, int64_t *number,
                 struct err *err)
{
    (void)pthread_mutex_lock(&saver->lock);
    int failed = queue(saver, change, number, err);
    wake(saver);
    (void)pthread_mutex_unlock(&saver->lock);
    return failed;
}

const struct queued_stream *saver_stream_waiting(const struct saver *saver)
{
    for (size_t i = 0; i < saver->stream_count; i++) {
        if (saver->streams[i].dirty)
            return &saver->streams[i];
    }
    return NULL;
}

static int queue_stream(struct saver *saver, const struct stored_stream *stream, struct err *err)
{
    char *clock = strdup(stream->clock);
    if (!clock)
        return err_memory(err, "a stream");
    for (size_t i = 0; i < saver->stream_count; i++) {
        struct queued_stream *at = &saver->streams[i];
        if (strcmp(at->stream.path, stream->path) != 0)
            continue;
        at->dirty |= strcmp(at->stream.clock, clock) != 0;
        free((char *)(uintptr_t)at->stream.clock);
        at->stream.clock = clock;
        return ERR_OK;
    }
    char *path = strdup(stream->path), *source = strdup(stream->source);
    int failed = path && source
                     ? array_reserve((void **)&saver->streams, &saver->stream_room,
                                     saver->stream_count + 1, sizeof *saver->streams, err)
                     : err_memory(err, "a stream");
    if (failed) {
        free(clock);
        free(path);
        free(source);
        return failed;
    }
    saver->streams[saver->stream_count++] =
        (struct queued_stream){{path, saver->session.uid, source, clock}, true};
    return ERR_OK;
}

int saver_stream(struct saver *saver, const struct stored_stream *stream, struct err *err)
{
    (void)pthread_mutex_lock(&saver->lock);
    int failed = queue_stream(saver, stream, err);
    wake(saver);
    (void)pthread_mutex_unlock(&saver->lock);
    return failed;
}

void saver_status(struct saver *saver, struct saver_status *out)
{
    (void)pthread_mutex_lock(&saver->lock);
    *out = (struct saver_status){.asked = (int64_t)saver->asked,
                                 .saved = (int64_t)saver->saved,
                                 .kept = (int64_t)saver->kept,
                                 .failing = saver->failing};
    memcpy(out->why, saver->why, sizeof out->why);
    memcpy(out->second_why, saver->second_why, sizeof out->second_why);
    (void)pthread_mutex_unlock(&saver->lock);
}

static struct queued_change at_number(struct saver *saver, int64_t number)
{
    struct queued_change out = {.durable_ns = NS_NONE};
    (void)pthread_mutex_lock(&saver->lock);
    if (number > 0 && (size_t)number <= saver->asked)
        out = *saver->changes[number - 1];
    (void)pthread_mutex_unlock(&saver->lock);
    return out;
}

int64_t saver_mark_id(struct saver *saver, int64_t number)
{
    return at_number(saver, number).mark_id;
}

int64_t saver_durable_ns(struct saver *saver, int64_t number)
{
    return at_number(saver, number).durable_ns;
}

bool saver_marks(struct saver *saver,
                 void (*each)(const struct mark *mark, int64_t as_of, void *context), void *context)
{
    (void)pthread_mutex_lock(&saver->lock);
    bool any = saver->marks_new;
    for (size_t i = 0; any && i < saver->mark_count; i++)
        each(&saver->marks[i], saver->marks_as_of, context);
    saver->marks_new = false;
    (void)pthread_mutex_unlock(&saver->lock);
    return any;
}

int saver_stop(struct saver *saver, int wait_ms, struct store **store, struct err *err)
{
    (void)pthread_mutex_lock(&saver->lock);
    saver->stop = true;
    saver->give_up_boottime_ns = boottime_now_ns() + wait_ms * NS_PER_MS;
    wake(saver);
    (void)pthread_mutex_unlock(&saver->lock);
    (void)pthread_join(saver->thread, NULL);
    const struct queued_stream *waiting = saver_stream_waiting(saver);
    size_t left = saver->asked - saver->saved;
    int failed = ERR_OK;
    if (left > 0 && saver->kept < saver->asked)
        failed = err_set(err, ERR_IO, "%zu changes NOT SAVED anywhere: %.180s; and: %.180s", left,
                         saver->why, saver->second_why);
    else if (left > 0)
        failed = err_set(err, ERR_IO,
                         "%zu changes are not in the case (%.160s); they lie in %s and come in by "
                         "themselves at the next start",
                         left, saver->why, second_place_path(saver->place));
    else if (waiting)
        failed = err_set(err, ERR_IO, "%s is not noted in the case (%.180s); attach it by hand",
                         waiting->stream.path,
                         *saver->stream_why ? saver->stream_why : "there was no time");
    *store = saver->store;
    saver_free(saver);
    return failed;
}
