/*
 * live_queue.c - records that wait for the writer. A list in memory, bounded; no thread of its own.
 */
#include <stdlib.h>
#include <string.h>

#include "case/live_stream_impl.h"

static void append(struct live_stream *stream, struct live_record *record)
{
    struct live_queue *queue = &stream->queue;
    if (queue->tail)
        queue->tail->next = record;
    else
        queue->head = record;
    queue->tail = record;
    queue->bytes += record->bytes;
    queue->waiting_ns += record->count * record->part->layout.record_ns;
    (void)pthread_cond_broadcast(&stream->changed);
}

static struct live_record *record_new(struct part *part, size_t samples)
{
    size_t bytes = sizeof(struct live_record) + samples * sizeof(float);
    struct live_record *made = malloc(bytes);
    if (made)
        *made = (struct live_record){.part = part, .bytes = bytes};
    return made;
}

/* The head may be in the writer's hands: it is not to be changed. */
static bool extends(const struct live_queue *queue, const struct part *part, int64_t onset_ns)
{
    const struct live_record *tail = queue->tail;
    return tail && tail != queue->head && tail->missing && tail->part == part &&
           tail->onset_ns + tail->count * part->layout.record_ns == onset_ns;
}

static int put_missing(struct live_stream *stream, struct part *part, int64_t number,
                       int64_t onset_ns, struct err *err)
{
    struct live_queue *queue = &stream->queue;
    if (extends(queue, part, onset_ns)) {
        queue->tail->count++;
        queue->waiting_ns += part->layout.record_ns;
        return ERR_OK;
    }
    struct live_record *record = record_new(part, 0);
    if (!record)
        return err_memory(err, "what waits for the disk");
    record->number = number;
    record->onset_ns = onset_ns;
    record->count = 1;
    record->missing = true;
    append(stream, record);
    return ERR_OK;
}

int live_queue_put(struct live_stream *stream, struct part *part, int64_t number, int64_t onset_ns,
                   const float *samples, bool *dropped, struct err *err)
{
    const size_t count = part->layout.record_total;
    struct live_record *record = record_new(part, count);
    int failed = ERR_OK;
    if (record) {
        record->number = number;
        record->onset_ns = onset_ns;
        record->count = 1;
        memcpy(record->samples, samples, count * sizeof *samples);
    }
    (void)pthread_mutex_lock(&stream->lock);
    *dropped = !record || stream->queue.bytes + record->bytes > stream->queue.most_bytes;
    if (*dropped)
        failed = put_missing(stream, part, number, onset_ns, err);
    else
        append(stream, record);
    (void)pthread_mutex_unlock(&stream->lock);
    if (*dropped)
        free(record);
    return failed;
}

int live_queue_close(struct live_stream *stream, struct part *part, struct err *err)
{
    struct live_record *record = record_new(part, 0);
    if (!record)
        return err_memory(err, "what waits for the disk");
    record->closes = true;
    (void)pthread_mutex_lock(&stream->lock);
    append(stream, record);
    (void)pthread_mutex_unlock(&stream->lock);
    return ERR_OK;
}

void live_queue_pop(struct live_queue *queue)
{
    struct live_record *record = queue->head;
    queue->head = record->next;
    if (!queue->head)
        queue->tail = NULL;
    queue->bytes -= record->bytes;
    queue->waiting_ns -= record->count * record->part->layout.record_ns;
    free(record);
}
