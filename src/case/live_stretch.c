/*
 * live_stretch.c - a stream's blocks laid into records, stretches and parts: for the queue, for the
 * screen, and for the clock's fit. Runs on the reader's thread and touches no file.
 *
 * A stretch goes on while samples follow one another. A record that a stretch leaves unfinished is
 * padded with missing samples, so that samples have the same numbers on the screen as in the file.
 */
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "case/live_stream_impl.h"

static void lock(struct live_intake *intake)
{
    (void)pthread_mutex_lock(&intake->stream->lock);
}

static void unlock(struct live_intake *intake)
{
    (void)pthread_mutex_unlock(&intake->stream->lock);
}

/* ---- time ---- */

static int64_t block_ns(const struct live_layout *layout)
{
    return layout->block_ns / layout->blocks;
}

/* Of the fastest channel. */
int64_t intake_period_ns(const struct live_layout *layout)
{
    return layout->record_ns / layout->most_samples;
}

/* From the start of the stretch to just after the last sample. */
int64_t intake_counted_ns(const struct live_intake *intake)
{
    const struct live_layout *layout = &intake->layout;
    return intake->stretch_done * layout->record_ns + mul_div((int64_t)intake->filled[0],
                                                              layout->record_ns,
                                                              layout->channels[0].record_samples);
}

/* When the first sample of a block was taken, at the latest, whose last one came at came_ns. */
int64_t intake_first_sample_ns(const struct live_layout *layout, int64_t came_ns)
{
    return came_ns - (block_ns(layout) - intake_period_ns(layout));
}

/* ---- records ---- */

/* Shows what the open record has and the screen has not. */
int intake_show(struct live_intake *intake, struct err *err)
{
    const float *from = intake->record;
    for (size_t i = 0; i < intake->layout.channel_count; i++) {
        size_t shown = intake->shown[i], count = intake->filled[i] - shown;
        if (count > 0) {
            int failed =
                growing_append(intake->part->growing, i, from + shown, (int64_t)count, err);
            if (failed)
                return failed;
        }
        intake->shown[i] = intake->filled[i];
        from += intake->layout.channels[i].record_samples;
    }
    return ERR_OK;
}

static int finish_record(struct live_intake *intake, struct err *err)
{
    const struct live_layout *layout = &intake->layout;
    int64_t onset_ns = intake->stretch_ns + intake->stretch_done * layout->record_ns;
    bool dropped = false;
    int failed = intake_show(intake, err);
    if (!failed)
        failed = live_queue_put(intake->stream, intake->part, intake->records, onset_ns,
                                intake->record, &dropped, err);
    if (failed)
        return failed;
    intake->dropped += dropped ? layout->channels[0].record_samples : 0;
    intake->records++;
    intake->stretch_done++;
    memset(intake->filled, 0, layout->channel_count * sizeof *intake->filled);
    memset(intake->shown, 0, layout->channel_count * sizeof *intake->shown);
    return ERR_OK;
}

/* Fills the open record, if it has anything, with missing samples. */
static int pad(struct live_intake *intake, struct err *err)
{
    const struct live_layout *layout = &intake->layout;
    float *to = intake->record;
    if (!intake->part || intake->filled[0] == 0)
        return ERR_OK;
    for (size_t i = 0; i < layout->channel_count; i++) {
        size_t samples = (size_t)layout->channels[i].record_samples;
        for (; intake->filled[i] < samples; intake->filled[i]++)
            to[intake->filled[i]] = NAN;
        to += samples;
    }
    return finish_record(intake, err);
}

static void copy_samples(struct live_intake *intake, const struct live_channel *channel,
                         const float *from, size_t count, float *to)
{
    for (size_t i = 0; i < count; i++) {
        bool fits = live_channel_holds(channel, from[i]);
        to[i] = fits ? from[i] : NAN; /* what no range could hold */
        intake->garbled += !fits;
    }
}

/* A block into as many records as it touches: all channels reach a record's end together. */
int intake_put_block(struct live_intake *intake, const float *samples, struct err *err)
{
    const struct live_layout *layout = &intake->layout;
    memset(intake->taken, 0, layout->channel_count * sizeof *intake->taken);
    while (intake->taken[0] < (size_t)layout->channels[0].block_samples) {
        size_t left = (size_t)layout->channels[0].block_samples - intake->taken[0];
        bool whole = left >= (size_t)layout->channels[0].record_samples - intake->filled[0];
        const float *from = samples;
        float *to = intake->record;
        for (size_t i = 0; i < layout->channel_count; i++) {
            const struct live_channel *channel = &layout->channels[i];
            size_t count = whole ? (size_t)channel->record_samples - intake->filled[i]
                                 : (size_t)channel->block_samples - intake->taken[i];
            copy_samples(intake, channel, from + intake->taken[i], count, to + intake->filled[i]);
            intake->taken[i] += count;
            intake->filled[i] += count;
            from += channel->block_samples;
            to += channel->record_samples;
        }
        int failed = whole ? finish_record(intake, err) : ERR_OK;
        if (failed)
            return failed;
    }
    intake->fresh = true;
    return ERR_OK;
}

/* ---- stretches and parts ---- */

/* The newest sample had arrived when the bytes were read. */
void intake_arrive(struct live_intake *intake, int64_t boottime_ns)
{
    if (!intake->fresh || !intake->part)
        return;
    int64_t newest_ns =
        intake->stretch_ns + intake_counted_ns(intake) - intake_period_ns(&intake->layout);
    lock(intake);
    arrival_add(&intake->part->fit, newest_ns, boottime_ns);
    unlock(intake);
    intake->fresh = false;
}

static int begin_stretch(struct live_intake *intake, int64_t onset_ns, int64_t boottime_ns,
                         struct err *err)
{
    int failed = growing_run(intake->part->growing, onset_ns, err);
    if (failed)
        return failed;
    lock(intake);
    failed = part_stretch(intake->part, onset_ns, err);
    if (!failed)
        arrival_add(&intake->part->fit, onset_ns, boottime_ns);
    unlock(intake);
    intake->stretch_ns = onset_ns;
    intake->stretch_done = 0;
    intake->own = (struct own_clock){0};
    intake->broken = false;
    return failed;
}

/* The next stretch of the part, ahead_ns after the end of this one by the stream's own time, or
 * (NS_NONE) as much later as its first sample came by the laptop's. */
int intake_next_stretch(struct live_intake *intake, int64_t ahead_ns, int64_t boottime_ns,
                        struct err *err)
{
    int64_t end_ns = intake->stretch_ns + intake_counted_ns(intake);
    if (ahead_ns == NS_NONE) {
        lock(intake);
        ahead_ns = intake_first_sample_ns(&intake->layout, boottime_ns) -
                   part_boottime(intake->part, end_ns);
        unlock(intake);
    }
    int failed = pad(intake, err);
    int64_t padded_ns = intake->stretch_ns + intake_counted_ns(intake);
    int64_t onset_ns = end_ns + (ahead_ns > 0 ? ahead_ns : 0);
    if (onset_ns < padded_ns)
        onset_ns = padded_ns;
    return failed ? failed : begin_stretch(intake, onset_ns, boottime_ns, err);
}

int intake_end_part(struct live_intake *intake, struct err *err)
{
    if (!intake->part)
        return ERR_OK;
    int failed = pad(intake, err);
    if (!failed)
        failed = live_queue_close(intake->stream, intake->part, err);
    if (!failed)
        intake->part = NULL;
    return failed;
}

static int record_memory(struct live_intake *intake, struct err *err)
{
    size_t channels = intake->layout.channel_count;
    void *record = NULL, *counts = NULL;
    int failed = array_new(&record, intake->layout.record_total, sizeof(float), err);
    if (!failed)
        failed = array_new_zero(&counts, 3 * channels, sizeof(size_t), err);
    if (failed) {
        free(record);
        return failed;
    }
    free(intake->record);
    free(intake->filled);
    intake->record = record;
    intake->filled = counts;
    intake->shown = intake->filled + channels;
    intake->taken = intake->shown + channels;
    intake->records = 0;
    return ERR_OK;
}

static int add_part(struct live_stream *stream, struct part *part, struct err *err)
{
    part->number = stream->next_number;
    int failed = array_reserve((void **)&stream->parts, &stream->part_room, stream->part_count + 1,
                               sizeof *stream->parts, err);
    if (!failed)
        failed = part_name(part, err);
    if (failed)
        return failed;
    stream->next_number++;
    stream->parts[stream->part_count++] = part;
    return ERR_OK;
}

/* A part whose first sample was taken at first_ns and came at boottime_ns. */
int intake_begin_part(struct live_intake *intake, int64_t first_ns, int64_t boottime_ns,
                      struct err *err)
{
    struct live_stream *stream = intake->stream;
    struct part *part = NULL;
    int failed = record_memory(intake, err);
    if (!failed)
        failed = part_new(stream, &intake->layout, first_ns + stream->civil_minus_boottime_ns,
                          &part, err);
    if (failed)
        return failed;
    lock(intake);
    failed = add_part(stream, part, err);
    unlock(intake);
    if (failed) {
        part_free(part);
        return failed;
    }
    intake->part = part;
    return begin_stretch(intake, 0, boottime_ns, err);
}
