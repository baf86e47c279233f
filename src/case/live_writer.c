/*
 * live_writer.c - the thread that writes what the intake has laid out. Waits for nobody but the
 * disk, and holds no lock while it does. A record that could not be written is tried again at the
 * same place until it can, or until the stream is given up.
 */
#include <errno.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

#include "base/array.h"
#include "base/file.h"
#include "base/ns.h"
#include "case/live_stream_impl.h"

#define SYNC_NS        (2 * NS_PER_S)
#define RETRY_NS       NS_PER_S
#define HASTY_RETRY_NS (50 * NS_PER_MS) /* when someone waits for the end */

static int64_t monotonic_ns(void)
{
    struct timespec now;
    (void)clock_gettime(CLOCK_MONOTONIC, &now); /* cannot fail: the clock is always there */
    return now.tv_sec * NS_PER_S + now.tv_nsec;
}

/* The caller holds the lock; it may wake early. */
static void wait_until(struct live_stream *stream, int64_t at_ns)
{
    struct timespec at = {at_ns / NS_PER_S, at_ns % NS_PER_S};
    (void)pthread_cond_timedwait(&stream->changed, &stream->lock, &at);
}

/* ---- one file ---- */

/* Takes the next number whose file is not there. */
static int take_free_number(struct part *part, struct err *err)
{
    struct live_stream *stream = part->stream;
    int failed = ERR_OK;
    while (!failed && access(part->path, F_OK) == 0) {
        (void)pthread_mutex_lock(&stream->lock);
        part->number = stream->next_number++;
        failed = part_name(part, err);
        (void)pthread_mutex_unlock(&stream->lock);
    }
    return failed;
}

static int make_file(struct part *part, struct err *err)
{
    struct live_stream *stream = part->stream;
    struct edf_channel_spec *channels = NULL;
    struct edf_spec spec;
    int failed = take_free_number(part, err);
    if (!failed)
        failed = live_layout_spec(&part->layout, &spec, &channels, err);
    if (failed)
        return failed;
    spec.subject = stream->subject;
    spec.start_civil_ns = part->start_civil_ns;
    failed = edf_writer_open(part->path, &spec, &part->writer, err);
    free(channels);
    /* A file that is not in its folder yet is lost with the power. */
    return failed ? failed : folder_sync(stream->folder, err);
}

static int open_part(struct part *part, struct err *err)
{
    struct edf_readback *readback = NULL;
    int failed = part->writer ? ERR_OK : make_file(part, err);
    if (!failed && !part->readback)
        failed = edf_readback_open(part->writer, &readback, err);
    if (failed || !readback)
        return failed;
    (void)pthread_mutex_lock(&part->stream->lock);
    part->readback = readback;
    (void)pthread_mutex_unlock(&part->stream->lock);
    return ERR_OK;
}

static int close_part(struct part *part, struct err *err)
{
    int failed = edf_writer_finish(part->writer, err);
    if (!failed)
        failed = folder_sync(part->stream->folder, err);
    if (failed)
        return failed;
    edf_writer_abandon(part->writer); /* complete: nothing is left to do but close it */
    part->writer = NULL;
    part->unsynced = false;
    (void)pthread_mutex_lock(&part->stream->lock);
    part->closed = true;
    (void)pthread_mutex_unlock(&part->stream->lock);
    return ERR_OK;
}

static int sync_part(struct part *part, struct err *err)
{
    if (!part || !part->writer || !part->unsynced)
        return ERR_OK;
    int failed = edf_writer_sync(part->writer, err);
    part->unsynced = failed != ERR_OK;
    return failed;
}

static const float *record_samples(const struct live_record *record, float *missing)
{
    size_t count = record->part->layout.record_total;
    if (!record->missing)
        return record->samples;
    for (size_t i = 0; i < count; i++)
        missing[i] = NAN;
    return missing;
}

/* All records of the item that are not in the file yet. */
static int write_record(const struct live_record *record, struct err *err)
{
    struct part *part = record->part;
    void *missing = NULL;
    int failed = open_part(part, err);
    if (failed)
        return failed;
    if (record->closes)
        return close_part(part, err);
    if (record->missing)
        failed = array_new(&missing, part->layout.record_total, sizeof(float), err);
    const float *samples = failed ? NULL : record_samples(record, missing);
    int64_t done = edf_writer_records(part->writer) - record->number;
    for (; done < record->count && !failed; done++) {
        failed = edf_writer_record(part->writer, record->onset_ns + done * part->layout.record_ns,
                                   samples, err);
        part->unsynced |= !failed;
    }
    free(missing);
    edf_readback_advance(part->readback, edf_writer_records(part->writer));
    return failed;
}

/* ---- the thread ---- */

/* The record at the head; NULL when the work is done. The caller holds the lock. */
static const struct live_record *next_record(struct live_stream *stream, int64_t sync_at_ns)
{
    while (!stream->queue.head && !stream->ending && monotonic_ns() < sync_at_ns)
        wait_until(stream, sync_at_ns);
    return stream->queue.head;
}

static void tell(struct live_stream *stream, const char *trouble)
{
    (void)pthread_mutex_lock(&stream->lock);
    (void)snprintf(stream->status.trouble, sizeof stream->status.trouble, "%.239s", trouble);
    (void)pthread_mutex_unlock(&stream->lock);
}

static void wait_to_retry(struct live_stream *stream)
{
    int64_t since_ns = monotonic_ns();
    (void)pthread_mutex_lock(&stream->lock);
    for (;;) {
        int64_t until_ns = since_ns + (stream->ending ? HASTY_RETRY_NS : RETRY_NS);
        if (stream->give_up || monotonic_ns() >= until_ns)
            break;
        wait_until(stream, until_ns);
    }
    (void)pthread_mutex_unlock(&stream->lock);
}

static void end(struct live_stream *stream)
{
    (void)pthread_mutex_lock(&stream->lock);
    stream->written = true;
    (void)pthread_cond_broadcast(&stream->changed);
    (void)pthread_mutex_unlock(&stream->lock);
}

void *live_writer_run(void *context)
{
    struct live_stream *stream = context;
    struct part *part = NULL;
    int64_t sync_at_ns = monotonic_ns() + SYNC_NS;
    for (;;) {
        struct err err = {0};
        (void)pthread_mutex_lock(&stream->lock);
        const struct live_record *record = next_record(stream, sync_at_ns);
        bool done = stream->give_up || (!record && stream->ending);
        (void)pthread_mutex_unlock(&stream->lock);
        if (done)
            break;
        int failed = record ? write_record(record, &err) : ERR_OK;
        if (!failed && record) {
            part = record->part;
            (void)pthread_mutex_lock(&stream->lock);
            live_queue_pop(&stream->queue);
            (void)pthread_mutex_unlock(&stream->lock);
        }
        if (!failed && monotonic_ns() >= sync_at_ns) {
            failed = sync_part(part, &err);
            sync_at_ns = monotonic_ns() + SYNC_NS;
        }
        tell(stream, failed ? err.text : "");
        if (failed)
            wait_to_retry(stream);
    }
    end(stream);
    return NULL;
}
