/*
 * live_part.c - one part of a live stream: its samples for the screen, also those that have left
 * memory, and its clock. Writes no file.
 */
#include <stdio.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "base/str.h"
#include "case/live_stream_impl.h"
#include "trace/overview.h"

/* Samples kept in memory for the screen; at least KEEP_RECORDS, of which the last may be filling.
 */
enum { KEEP_S = 60, KEEP_RECORDS = 4 };

/* ---- samples that have left memory ---- */

/* From records that wait for the disk: as many of [first, first + count) as lie in the record that
 * holds `first`. 0 when it is not in the queue. The caller holds the lock. */
static int64_t copy_waiting(const struct part *part, size_t channel, int64_t first, int64_t count,
                            float *out)
{
    const struct live_layout *layout = &part->layout;
    const int64_t samples = layout->channels[channel].record_samples;
    const int64_t number = first / samples;
    const struct live_record *record = part->stream->queue.head;
    while (record && (record->part != part || record->closes || number < record->number ||
                      number >= record->number + record->count))
        record = record->next;
    if (!record)
        return 0;
    size_t at = 0;
    for (size_t i = 0; i < channel; i++)
        at += (size_t)layout->channels[i].record_samples;
    int64_t within = first % samples, length = samples - within;
    length = length < count ? length : count;
    for (int64_t i = 0; i < length; i++)
        out[i] = record->missing ? NAN : record->samples[at + (size_t)(within + i)];
    return length;
}

static int read_past(void *context, size_t channel, int64_t first, int64_t count, float *out,
                     struct err *err)
{
    struct part *part = context;
    pthread_mutex_t *lock = &part->stream->lock;
    while (count > 0) {
        (void)pthread_mutex_lock(lock);
        const struct edf_readback *readback = part->readback;
        int64_t written = readback ? edf_readback_samples(readback, channel) : 0;
        int64_t step = first < written ? 0 : copy_waiting(part, channel, first, count, out);
        bool lost = first >= written && step == 0;
        (void)pthread_mutex_unlock(lock);
        if (lost)
            return err_set(err, ERR_IO, "%s: what was not written is no longer in memory",
                           part->stream->stem);
        if (step == 0) {
            step = written - first < count ? written - first : count;
            int failed = edf_readback_read(readback, channel, first, step, out, err);
            if (failed)
                return failed;
        }
        first += step;
        count -= step;
        out += step;
    }
    return ERR_OK;
}

/* ---- making ---- */

static int make_growing(struct part *part, struct err *err)
{
    const struct live_layout *layout = &part->layout;
    struct growing_past past = {read_past, part};
    void *memory = NULL;
    int failed = array_new(&memory, layout->channel_count, sizeof(struct growing_channel), err);
    if (failed)
        return failed;
    struct growing_channel *channels = memory;
    for (size_t i = 0; i < layout->channel_count; i++) {
        const struct live_channel *channel = &layout->channels[i];
        double rate_hz = live_channel_rate_hz(layout, i);
        int64_t keep = (int64_t)(KEEP_S * rate_hz) + 2 * OVERVIEW_BLOCK;
        if (keep < (int64_t)KEEP_RECORDS * channel->record_samples)
            keep = (int64_t)KEEP_RECORDS * channel->record_samples;
        channels[i] =
            (struct growing_channel){channel->label, channel->unit, channel->role, rate_hz, keep};
    }
    failed = growing_new(channels, layout->channel_count, &past, &part->growing, err);
    free(channels);
    return failed;
}

int part_name(struct part *part, struct err *err)
{
    struct str path = {0};
    str_putf(&path, "%s/%s-live-%d.bdf", part->stream->folder, part->stream->stem, part->number);
    if (str_failed(&path)) {
        str_free(&path);
        return err_memory(err, "a part's name");
    }
    free(part->path);
    part->path = path.text;
    part->stream->status.named++;
    return ERR_OK;
}

int part_new(struct live_stream *stream, const struct live_layout *layout, int64_t start_civil_ns,
             struct part **out, struct err *err)
{
    void *memory = NULL;
    int failed = array_new_zero(&memory, 1, sizeof(struct part), err);
    if (failed)
        return failed;
    struct part *made = memory;
    made->stream = stream;
    made->start_civil_ns = start_civil_ns;
    failed = live_layout_copy(layout, &made->layout, err);
    if (!failed)
        failed = make_growing(made, err);
    if (failed)
        part_free(made);
    else
        *out = made;
    return failed;
}

void part_free(struct part *part)
{
    if (!part)
        return;
    growing_free(part->growing);
    edf_writer_abandon(part->writer);
    edf_readback_free(part->readback);
    live_layout_free(&part->layout);
    free(part->path);
    free(part->pieces);
    free(part->laid);
    free(part);
}

/* ---- its clock ---- */

/* The present stretch on boottimes, from its onset on; false before anything came. */
static bool present_piece(const struct part *part, int64_t case_minus_boottime_ns,
                          struct clock_piece *out)
{
    if (!arrival_piece(&part->fit, case_minus_boottime_ns, out))
        return false;
    out->case_ns += mul_div(part->stretch_ns - out->at_ns, out->case_span_ns, out->span_ns);
    out->at_ns = part->stretch_ns;
    /* A backlog that is delivered after a break can be older than the break: pieces stay in order.
     */
    const struct clock_piece *before =
        part->piece_count > 0 ? &part->pieces[part->piece_count - 1] : NULL;
    if (before && out->case_ns <= before->case_ns + case_minus_boottime_ns)
        out->case_ns = before->case_ns + case_minus_boottime_ns + 1;
    return true;
}

int part_stretch(struct part *part, int64_t onset_ns, struct err *err)
{
    struct clock_piece piece;
    if (present_piece(part, 0, &piece)) {
        int failed = array_reserve((void **)&part->pieces, &part->piece_room, part->piece_count + 1,
                                   sizeof *part->pieces, err);
        if (failed)
            return failed;
        part->pieces[part->piece_count++] = piece;
    }
    part->fit = (struct arrival_fit){0};
    part->stretch_ns = onset_ns;
    return ERR_OK;
}

int part_pieces(const struct part *part, int64_t case_minus_boottime_ns,
                struct clock_piece **pieces, size_t *room, size_t *count, struct err *err)
{
    int failed = array_reserve((void **)pieces, room, part->piece_count + 1, sizeof **pieces, err);
    if (failed)
        return failed;
    for (size_t i = 0; i < part->piece_count; i++) {
        (*pieces)[i] = part->pieces[i];
        (*pieces)[i].case_ns += case_minus_boottime_ns;
    }
    *count = part->piece_count;
    *count += present_piece(part, case_minus_boottime_ns, &(*pieces)[*count]);
    return ERR_OK;
}

int64_t part_boottime(const struct part *part, int64_t own_ns)
{
    struct clock_piece piece;
    if (!present_piece(part, 0, &piece))
        return own_ns;
    return piece.case_ns + mul_div(own_ns - piece.at_ns, piece.case_span_ns, piece.span_ns);
}

int part_refresh(struct part *part, struct err *err)
{
    struct live_stream *stream = part->stream;
    int64_t now_ns = live_boottime_ns();
    int failed = ERR_OK;
    if (part->settled)
        return ERR_OK;
    (void)pthread_mutex_lock(&stream->lock);
    bool closed = part->closed;
    /* A fit that moves with every packet would let the picture tremble. */
    if (closed || part->laid_count != part->piece_count + 1 ||
        now_ns - part->laid_boottime_ns >= NS_PER_S) {
        failed = part_pieces(part, stream->case_minus_boottime_ns, &part->laid, &part->laid_room,
                             &part->laid_count, err);
        part->laid_boottime_ns = now_ns;
    }
    (void)pthread_mutex_unlock(&stream->lock);
    struct clock_map map = {.aligned = true, .pieces = part->laid, .piece_count = part->laid_count};
    if (!failed)
        failed = growing_refresh(part->growing, &map, err);
    part->settled = closed && !failed;
    return failed;
}
