/*
 * live_intake.c - what a stream's headers and blocks mean: whether a block goes on with the
 * stretch, begins another or another part, and which ranges its values need. Laying them down is
 * live_stretch.c's.
 */
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "case/live_stream_impl.h"

/* Blocks of channels whose range is not known are held for so long. */
#define HELD_NS NS_PER_S

static void lock(struct live_intake *intake)
{
    (void)pthread_mutex_lock(&intake->stream->lock);
}

static void unlock(struct live_intake *intake)
{
    (void)pthread_mutex_unlock(&intake->stream->lock);
}

/* ---- ranges ---- */

/* Whether a block has a value that a wider range could hold; widens when `widen`. */
static bool beyond(struct live_intake *intake, const float *samples, bool widen)
{
    bool any = false;
    for (size_t i = 0; i < intake->layout.channel_count; i++) {
        struct live_channel *channel = &intake->layout.channels[i];
        for (int k = 0; k < channel->block_samples; k++) {
            if (live_channel_holds(channel, samples[k]) || !live_value_fits_a_file(samples[k]))
                continue;
            any = true;
            if (widen)
                live_layout_widen(channel, (double)samples[k]);
        }
        samples += channel->block_samples;
    }
    return any;
}

/* The same samples go on in a part with wider ranges, and so does the clock's fit. */
static int widen_part(struct live_intake *intake, const float *samples, int64_t boottime_ns,
                      struct err *err)
{
    int64_t end_ns = intake->stretch_ns + intake_counted_ns(intake);
    lock(intake);
    struct arrival_fit fit = intake->part->fit;
    int64_t first_ns = part_boottime(intake->part, end_ns);
    unlock(intake);
    int failed = intake_end_part(intake, err);
    if (failed)
        return failed;
    (void)beyond(intake, samples, true);
    failed = intake_begin_part(intake, first_ns, boottime_ns, err);
    if (failed)
        return failed;
    arrival_shift(&fit, end_ns);
    lock(intake);
    intake->part->fit = fit;
    unlock(intake);
    return ERR_OK;
}

/* ---- blocks ---- */

static int place(struct live_intake *intake, int64_t own_ns, const float *samples,
                 int64_t boottime_ns, struct err *err)
{
    const struct live_layout *layout = &intake->layout;
    bool wider = beyond(intake, samples, false);
    enum own_answer answer = OWN_GOES_ON;
    int64_t ahead_ns = 0;
    int failed = ERR_OK;
    if (intake->part && !intake->broken)
        answer = own_clock_see(&intake->own, own_ns, intake_counted_ns(intake),
                               intake_period_ns(layout), &ahead_ns);
    intake->gaps += answer != OWN_GOES_ON;
    bool goes_on = intake->part && !intake->broken && answer == OWN_GOES_ON;
    if (wider && goes_on) {
        failed = widen_part(intake, samples, boottime_ns, err);
    } else if (wider || !intake->part) {
        failed = intake_end_part(intake, err);
        if (!failed) {
            (void)beyond(intake, samples, true);
            failed = intake_begin_part(intake, intake_first_sample_ns(layout, boottime_ns),
                                       boottime_ns, err);
        }
    } else if (!goes_on) {
        failed = intake_next_stretch(intake, answer == OWN_FORWARD ? ahead_ns : NS_NONE,
                                     boottime_ns, err);
    }
    if (!failed && !intake->own.known)
        (void)own_clock_see(&intake->own, own_ns, 0, intake_period_ns(layout), &ahead_ns);
    return failed ? failed : intake_put_block(intake, samples, err);
}

/* Ranges from the held blocks, then the blocks as if they came now. */
static int release(struct live_intake *intake, struct err *err)
{
    const struct live_layout *layout = &intake->layout;
    const size_t count = intake->held_count;
    const float *at = intake->held_samples;
    int failed = ERR_OK;
    if (count == 0)
        return ERR_OK;
    for (size_t i = 0; i < layout->channel_count; i++) {
        struct live_channel *channel = &intake->layout.channels[i];
        size_t samples = (size_t)channel->block_samples;
        double widest = 0;
        for (size_t k = 0; k < count * samples; k++) {
            float value = at[k / samples * layout->block_total + k % samples];
            if (live_value_fits_a_file(value))
                widest = fmax(widest, fabs((double)value));
        }
        if (channel->low == channel->high)
            live_layout_set_range(channel, widest > 0 ? widest : 1);
        at += samples;
    }
    intake->held_count = 0;
    for (size_t i = 0; i < count && !failed; i++) {
        const struct held_block *held = &intake->held[i];
        if (i > 0 && held->boottime_ns != held[-1].boottime_ns)
            intake_arrive(intake, held[-1].boottime_ns);
        failed = place(intake, held->own_ns, intake->held_samples + i * layout->block_total,
                       held->boottime_ns, err);
    }
    if (!failed)
        intake_arrive(intake, intake->held[count - 1].boottime_ns);
    return failed;
}

static int hold(struct live_intake *intake, int64_t own_ns, const float *samples, struct err *err)
{
    size_t total = intake->layout.block_total;
    intake->held[intake->held_count] = (struct held_block){own_ns, intake->boottime_ns};
    memcpy(intake->held_samples + intake->held_count * total, samples, total * sizeof *samples);
    intake->held_count++;
    return intake->held_count == intake->held_most ? release(intake, err) : ERR_OK;
}

static int take_block(void *context, int64_t own_ns, const float *samples, struct err *err)
{
    struct live_intake *intake = context;
    intake->samples += intake->layout.channels[0].block_samples;
    if (!live_layout_ranged(&intake->layout))
        return hold(intake, own_ns, samples, err);
    return place(intake, own_ns, samples, intake->boottime_ns, err);
}

static int held_memory(struct live_intake *intake, const struct live_layout *layout,
                       struct err *err)
{
    void *held = NULL, *samples = NULL;
    size_t most = 1 + (size_t)(HELD_NS / (layout->block_ns / layout->blocks + 1));
    int failed = array_new(&held, most, sizeof *intake->held, err);
    if (!failed)
        failed = array_new(&samples, most * layout->block_total, sizeof(float), err);
    if (failed) {
        free(held);
        return failed;
    }
    free(intake->held);
    free(intake->held_samples);
    intake->held = held;
    intake->held_samples = samples;
    intake->held_count = 0;
    intake->held_most = most;
    return ERR_OK;
}

static int take_header(void *context, const struct stream_header *header, struct err *err)
{
    struct live_intake *intake = context;
    struct live_layout layout;
    if (intake->has_layout && live_layout_matches(&intake->layout, header))
        return ERR_OK;
    int failed = release(intake, err);
    if (!failed)
        failed = intake_end_part(intake, err);
    if (!failed)
        failed = live_layout_new(header, &layout, err);
    if (failed)
        return failed;
    failed = held_memory(intake, &layout, err);
    if (failed) {
        live_layout_free(&layout);
        return failed;
    }
    live_layout_free(&intake->layout);
    intake->layout = layout;
    intake->has_layout = true;
    return ERR_OK;
}

/* ---- what the reader calls ---- */

struct stream_sink live_intake_sink(struct live_intake *intake)
{
    return (struct stream_sink){take_header, take_block, intake};
}

void live_intake_read(struct live_intake *intake, int64_t boottime_ns)
{
    intake->boottime_ns = boottime_ns;
    lock(intake);
    intake->stream->status.last_boottime_ns = boottime_ns;
    unlock(intake);
}

static void tell(struct live_intake *intake)
{
    lock(intake);
    struct live_status *status = &intake->stream->status;
    status->samples = intake->samples;
    status->dropped = intake->dropped;
    status->gaps = intake->gaps;
    status->garbled = intake->garbled + intake->garbled_by_parser;
    unlock(intake);
}

int live_intake_flush(struct live_intake *intake, struct err *err)
{
    int failed = ERR_OK;
    if (intake->part && intake->fresh) {
        failed = intake_show(intake, err);
        intake_arrive(intake, intake->boottime_ns);
    }
    tell(intake);
    return failed;
}

int live_intake_break(struct live_intake *intake, struct err *err)
{
    int failed = release(intake, err);
    if (!failed)
        failed = live_intake_flush(intake, err);
    intake->gaps += intake->part && !intake->broken;
    intake->broken = true;
    tell(intake);
    return failed;
}

int live_intake_end(struct live_intake *intake, struct err *err)
{
    int failed = release(intake, err);
    if (!failed)
        failed = live_intake_flush(intake, err);
    if (!failed)
        failed = intake_end_part(intake, err);
    tell(intake);
    return failed;
}

void live_intake_free(struct live_intake *intake)
{
    live_layout_free(&intake->layout);
    free(intake->held);
    free(intake->held_samples);
    free(intake->record);
    free(intake->filled);
}
