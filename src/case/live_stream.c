/*
 * live_stream.c - a live stream as its owner sees it: making it, looking at it, ending it. The
 * source is live_reader.c's.
 */
#include "case/live_stream.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

#include "base/array.h"
#include "base/ns.h"
#include "base/str.h"
#include "case/live_stream_impl.h"

/* Open and nothing comes: silent. A writer that was given up may end its last call for so long. */
#define SILENT_NS (3 * NS_PER_S)
#define GRACE_NS  (200 * NS_PER_MS)

int64_t live_boottime_ns(void)
{
    struct timespec now;
    (void)clock_gettime(CLOCK_BOOTTIME, &now); /* cannot fail: Linux has had it since 2.6.39 */
    return now.tv_sec * NS_PER_S + now.tv_nsec;
}

/* ---- making ---- */

/* The file's patient field: code, and three fields of EDF+ that are not known. */
static char *subject_field(const char *subject)
{
    char code[70];
    struct str field = {0};
    live_ascii(subject && *subject ? subject : "X", code, sizeof code);
    for (char *c = code; *c; c++)
        *c = *c == ' ' ? '_' : *c;
    str_putf(&field, "%s X X X", code);
    if (str_failed(&field))
        str_free(&field);
    return field.text;
}

/* The first number for which no part is there. */
static int first_number(const struct live_stream *stream, int *out, struct err *err)
{
    struct str path = {0};
    int number = 0;
    do {
        number++;
        str_clear(&path);
        str_putf(&path, "%s/%s-live-%d.bdf", stream->folder, stream->stem, number);
    } while (!str_failed(&path) && access(path.text, F_OK) == 0);
    int failed = str_failed(&path) ? err_memory(err, "a part's name") : ERR_OK;
    str_free(&path);
    if (!failed)
        *out = number;
    return failed;
}

static int start_lock(struct live_stream *stream, struct err *err)
{
    pthread_condattr_t monotonic;
    (void)pthread_mutex_init(&stream->lock, NULL);
    int code = pthread_condattr_init(&monotonic);
    if (code == 0)
        code = pthread_condattr_setclock(&monotonic, CLOCK_MONOTONIC);
    if (code == 0)
        code = pthread_cond_init(&stream->changed, &monotonic);
    return code == 0 ? ERR_OK
                     : err_set(err, ERR_MEMORY, "cannot start a live stream: %s", strerror(code));
}

int live_stream_new(const struct live_stream_config *config, struct live_stream **out,
                    struct err *err)
{
    void *memory = NULL;
    int failed = array_new_zero(&memory, 1, sizeof(struct live_stream), err);
    if (failed)
        return failed;
    struct live_stream *made = memory;
    made->folder = strdup(config->folder);
    made->stem = strdup(config->stem);
    made->subject = subject_field(config->subject);
    made->case_minus_boottime_ns = config->case_minus_boottime_ns;
    made->civil_minus_boottime_ns = config->civil_minus_boottime_ns;
    made->queue.most_bytes = LIVE_QUEUE_BYTES;
    made->status.last_boottime_ns = NS_NONE;
    made->intake.stream = made;
    failed = start_lock(made, err);
    if (!failed && (!made->folder || !made->stem || !made->subject))
        failed = err_memory(err, "a live stream");
    if (!failed)
        failed = first_number(made, &made->next_number, err);
    if (!failed && pthread_create(&made->writer, NULL, live_writer_run, made) != 0)
        failed = err_set(err, ERR_MEMORY, "cannot start a thread to write the live stream");
    made->writing = !failed;
    made->stopped = failed != ERR_OK;
    if (failed)
        live_stream_free(made);
    else
        *out = made;
    return failed;
}

/* ---- looking ---- */

static double drift_ppm(const struct live_stream *stream)
{
    struct clock_piece piece;
    const struct part *part = stream->part_count > 0 ? stream->parts[stream->part_count - 1] : NULL;
    if (!part || !arrival_tells_drift(&part->fit) || !arrival_piece(&part->fit, 0, &piece))
        return (double)NAN;
    return clock_piece_drift_ppm(&piece);
}

void live_stream_status(struct live_stream *stream, struct live_status *out)
{
    int64_t now_ns = live_boottime_ns();
    (void)pthread_mutex_lock(&stream->lock);
    *out = stream->status;
    out->waiting_ns = stream->queue.waiting_ns;
    out->part_count = stream->part_count;
    out->drift_ppm = drift_ppm(stream);
    (void)pthread_mutex_unlock(&stream->lock);
    if (out->state != LIVE_RECEIVING)
        return;
    int64_t last_ns = out->last_boottime_ns;
    if (last_ns == NS_NONE) {
        out->state = LIVE_SILENT;
        (void)snprintf(out->text, sizeof out->text, "open, nothing has come yet");
    } else if (now_ns - last_ns >= SILENT_NS) {
        out->state = LIVE_SILENT;
        (void)snprintf(out->text, sizeof out->text, "open, nothing for %lld s",
                       (long long)((now_ns - last_ns) / NS_PER_S));
    }
}

int live_stream_part(struct live_stream *stream, size_t index, struct live_part *out,
                     struct err *err)
{
    size_t count = 0;
    (void)pthread_mutex_lock(&stream->lock);
    if (index >= stream->part_count) {
        (void)pthread_mutex_unlock(&stream->lock);
        return err_set(err, ERR_USAGE, "a live stream has no part %zu", index);
    }
    const struct part *part = stream->parts[index];
    char *path = strdup(part->path);
    int failed = path ? part_pieces(part, stream->case_minus_boottime_ns, &stream->asked_pieces,
                                    &stream->asked_room, &count, err)
                      : err_memory(err, "a part's name");
    bool closed = part->closed;
    (void)pthread_mutex_unlock(&stream->lock);
    if (failed) {
        free(path);
        return failed;
    }
    free(stream->asked_path);
    stream->asked_path = path;
    *out = (struct live_part){path, closed, stream->asked_pieces, count};
    return ERR_OK;
}

/* The traces of a part that is seen for the first time. */
static int add_traces(struct live_stream *stream, const struct part *part, struct err *err)
{
    size_t channels = part->layout.channel_count;
    int failed = array_reserve((void **)&stream->traces, &stream->trace_room,
                               stream->trace_count + channels, sizeof(struct trace *), err);
    if (failed)
        return failed;
    for (size_t i = 0; i < channels; i++)
        stream->traces[stream->trace_count++] = growing_trace(part->growing, i);
    return ERR_OK;
}

/* The reader may be moving the list of parts: never the parts. */
static struct part *part_at(struct live_stream *stream, size_t index)
{
    (void)pthread_mutex_lock(&stream->lock);
    struct part *part = index < stream->part_count ? stream->parts[index] : NULL;
    (void)pthread_mutex_unlock(&stream->lock);
    return part;
}

int live_stream_refresh(struct live_stream *stream, struct trace *const **traces, size_t *count,
                        struct err *err)
{
    struct part *part;
    for (size_t i = 0; (part = part_at(stream, i)) != NULL; i++) {
        int failed = part_refresh(part, err);
        if (!failed && i == stream->traced_parts) {
            failed = add_traces(stream, part, err);
            stream->traced_parts += !failed;
        }
        if (failed)
            return failed;
    }
    *traces = stream->traces;
    *count = stream->trace_count;
    return ERR_OK;
}

/* ---- ending ---- */

/* Waits until the writer has ended, until at_ns at most; the caller holds the lock. */
static bool wait_for_writer(struct live_stream *stream, int64_t at_ns)
{
    struct timespec at = {at_ns / NS_PER_S, at_ns % NS_PER_S};
    int code = 0;
    while (!stream->written && code == 0)
        code = pthread_cond_timedwait(&stream->changed, &stream->lock, &at);
    return stream->written;
}

static int end_writer(struct live_stream *stream, int wait_ms, struct err *err)
{
    struct timespec now;
    int failed = ERR_OK;
    (void)clock_gettime(CLOCK_MONOTONIC, &now); /* cannot fail: the clock is always there */
    int64_t until_ns = now.tv_sec * NS_PER_S + now.tv_nsec + wait_ms * NS_PER_MS;
    (void)pthread_mutex_lock(&stream->lock);
    stream->ending = true;
    (void)pthread_cond_broadcast(&stream->changed);
    bool ended = wait_for_writer(stream, until_ns);
    if (!ended) {
        stream->give_up = true;
        (void)pthread_cond_broadcast(&stream->changed);
        failed = err_set(err, ERR_IO, "the last %.1f s of the live stream are not written: %.300s",
                         s_from_ns(stream->queue.waiting_ns),
                         *stream->status.trouble ? stream->status.trouble : "the disk is too slow");
        ended = wait_for_writer(stream, until_ns + GRACE_NS);
    }
    (void)pthread_mutex_unlock(&stream->lock);
    if (ended) {
        (void)pthread_join(stream->writer, NULL);
        stream->writing = false;
    }
    return failed;
}

int live_stream_stop(struct live_stream *stream, int wait_ms, struct err *err)
{
    struct err why = {0};
    if (stream->stopped)
        return ERR_OK;
    stream->stopped = true;
    if (stream->reader)
        stream->reader->stop(stream->reader);
    int unfinished = live_intake_end(&stream->intake, &why);
    int failed = end_writer(stream, wait_ms, err);
    if (!failed && unfinished)
        failed = err_set(err, why.code, "%s", why.text);
    return failed;
}

void live_stream_free(struct live_stream *stream)
{
    if (!stream)
        return;
    if (!stream->stopped) {
        /* Whoever wants to know stops it first: what is not written at once is given up. */
        (void)!live_stream_stop(stream, 0, NULL);
    }
    if (stream->writing)
        (void)pthread_join(stream->writer, NULL);
    if (stream->reader)
        stream->reader->free(stream->reader);
    while (stream->queue.head)
        live_queue_pop(&stream->queue);
    for (size_t i = 0; i < stream->part_count; i++)
        part_free(stream->parts[i]);
    live_intake_free(&stream->intake);
    (void)pthread_cond_destroy(&stream->changed);
    (void)pthread_mutex_destroy(&stream->lock);
    free(stream->parts);
    free(stream->folder);
    free(stream->stem);
    free(stream->subject);
    free(stream->traces);
    free(stream->asked_path);
    free(stream->asked_pieces);
    free(stream);
}
