/*
 * growing.c - appending samples and reading them back meanwhile. Writes no file.
 *
 * One lock guards totals, rings, finished blocks and runs; it is held for a copy of at most
 * COPY_MOST samples or a look-up. Extremes of the block that is filling are the writer's alone;
 * the end of a channel that fills no block yet is scanned from the ring.
 */
#include "trace/growing.h"

#include <math.h>
#include <pthread.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "dsp/stats.h"
#include "trace/extremes.h"

enum { COPY_MOST = 4096, FIRST_BLOCKS = 64, CHUNKS = 40 };

/* Blocks of one level. Chunk k holds FIRST_BLOCKS << k of them, so that few chunks hold any number
 * and none is ever moved. */
struct level {
    struct extremes *chunks[CHUNKS];
    int64_t room, count;
};

struct growing_run_start {
    int64_t start_ns;
    int64_t *first; /* number of its first sample, shape (channel_count) */
};

struct growing_trace {
    struct trace trace;
    struct growing *growing;
    char *name, *unit;
    /* guarded */
    float *ring; /* sample k is at k % keep */
    int64_t keep, total;
    struct level levels[OVERVIEW_LEVELS];
    /* the writer's: extremes of the block that is filling at each level */
    struct extremes filling[OVERVIEW_LEVELS];
    /* the reader's */
    int64_t samples; /* as of the last refresh */
    struct run *own, *laid;
    size_t own_room, laid_room, run_count;
};

struct growing {
    pthread_mutex_t lock;
    struct growing_trace *channels;
    size_t channel_count;
    struct growing_past past;
    struct growing_run_start *starts; /* guarded */
    size_t start_count, start_room;
};

/* ---- blocks ---- */

static struct extremes *block_of(const struct level *level, int64_t index)
{
    int chunk = 63 - __builtin_clzll((unsigned long long)(index / FIRST_BLOCKS + 1));
    int64_t before = (int64_t)FIRST_BLOCKS * ((INT64_C(1) << chunk) - 1);
    return &level->chunks[chunk][index - before];
}

/* Room for `need` blocks. A new chunk is not in use yet: no reader looks at it. */
static int level_reserve(struct level *level, int64_t need, struct err *err)
{
    for (int chunk = 0; level->room < need; chunk++) {
        int64_t size = (int64_t)FIRST_BLOCKS << chunk;
        void *memory = NULL;
        if (level->chunks[chunk])
            continue;
        int failed = array_new(&memory, (size_t)size, sizeof(struct extremes), err);
        if (failed)
            return failed;
        level->chunks[chunk] = memory;
        level->room += size;
    }
    return ERR_OK;
}

static int reserve(struct growing_trace *channel, int64_t samples, struct err *err)
{
    int64_t blocks = samples / OVERVIEW_BLOCK;
    int failed = ERR_OK;
    for (int i = 0; i < OVERVIEW_LEVELS && !failed; i++, blocks /= OVERVIEW_FAN)
        failed = level_reserve(&channel->levels[i], blocks, err);
    return failed;
}

/* A block of level 0 is full: so may be the one above it, and so on. */
static void push_block(struct growing_trace *channel)
{
    for (int i = 0; i < OVERVIEW_LEVELS; i++) {
        struct level *level = &channel->levels[i];
        struct extremes done = channel->filling[i];
        *block_of(level, level->count++) = done;
        channel->filling[i] = (struct extremes){NAN, NAN};
        if (i + 1 < OVERVIEW_LEVELS)
            extremes_widen(&channel->filling[i + 1], done);
        if (level->count % OVERVIEW_FAN != 0)
            break;
    }
}

/* ---- appending ---- */

static void put_in_ring(struct growing_trace *channel, const float *samples, int64_t count)
{
    int64_t at = channel->total % channel->keep, straight = channel->keep - at;
    straight = straight < count ? straight : count;
    memcpy(channel->ring + at, samples, (size_t)straight * sizeof *samples);
    memcpy(channel->ring, samples + straight, (size_t)(count - straight) * sizeof *samples);
}

int growing_append(struct growing *growing, size_t index, const float *samples, int64_t count,
                   struct err *err)
{
    struct growing_trace *channel = &growing->channels[index];
    if (growing->start_count == 0)
        return err_set(err, ERR_USAGE, "%s: samples before the first run", channel->name);
    int failed = reserve(channel, channel->total + count, err);
    if (failed)
        return failed;
    while (count > 0) {
        int64_t room = OVERVIEW_BLOCK - channel->total % OVERVIEW_BLOCK;
        int64_t step = room < count ? room : count;
        float low = INFINITY, high = -INFINITY;
        widen_extremes(samples, step, &low, &high);
        if (low <= high)
            extremes_widen(&channel->filling[0], (struct extremes){low, high});
        (void)pthread_mutex_lock(&growing->lock);
        put_in_ring(channel, samples, step);
        if (step == room)
            push_block(channel);
        channel->total += step;
        (void)pthread_mutex_unlock(&growing->lock);
        samples += step;
        count -= step;
    }
    return ERR_OK;
}

int growing_run(struct growing *growing, int64_t start_ns, struct err *err)
{
    void *first = NULL;
    int failed = array_new(&first, growing->channel_count, sizeof(int64_t), err);
    if (failed)
        return failed;
    struct growing_run_start start = {start_ns, first};
    for (size_t i = 0; i < growing->channel_count; i++)
        start.first[i] = growing->channels[i].total;
    (void)pthread_mutex_lock(&growing->lock);
    failed = array_reserve((void **)&growing->starts, &growing->start_room,
                           growing->start_count + 1, sizeof *growing->starts, err);
    if (!failed)
        growing->starts[growing->start_count++] = start;
    (void)pthread_mutex_unlock(&growing->lock);
    if (failed)
        free(first);
    return failed;
}

/* ---- reading ---- */

static struct growing_trace *self(const struct trace *trace)
{
    return (struct growing_trace *)(uintptr_t)trace;
}

/* Copies as much of [first, first + count) as the ring holds from `first` on, COPY_MOST at most;
 * 0 when `first` has left it: then *oldest is the first sample that has not. */
static int64_t copy_from_ring(struct growing_trace *channel, int64_t first, int64_t count,
                              float *out, int64_t *oldest)
{
    pthread_mutex_t *lock = &channel->growing->lock;
    int64_t copied = 0;
    (void)pthread_mutex_lock(lock);
    *oldest = channel->total > channel->keep ? channel->total - channel->keep : 0;
    if (first >= *oldest) {
        copied = count < COPY_MOST ? count : COPY_MOST;
        int64_t at = first % channel->keep, straight = channel->keep - at;
        straight = straight < copied ? straight : copied;
        memcpy(out, channel->ring + at, (size_t)straight * sizeof *out);
        memcpy(out + straight, channel->ring, (size_t)(copied - straight) * sizeof *out);
    }
    (void)pthread_mutex_unlock(lock);
    return copied;
}

static int growing_read(const struct trace *trace, int64_t first, int64_t count, float *out,
                        struct err *err)
{
    struct growing_trace *channel = self(trace);
    const struct growing_past *past = &channel->growing->past;
    size_t index = (size_t)(channel - channel->growing->channels);
    while (count > 0) {
        int64_t oldest, step = copy_from_ring(channel, first, count, out, &oldest);
        if (step == 0) {
            step = oldest - first < count ? oldest - first : count;
            int failed = past->read(past->context, index, first, step, out, err);
            if (failed)
                return failed;
        }
        first += step;
        count -= step;
        out += step;
    }
    return ERR_OK;
}

static struct extremes block_at(const void *context, int level, int64_t index)
{
    const struct growing_trace *channel = context;
    return *block_of(&channel->levels[level], index);
}

/* By reading: for less than two blocks. */
static int direct(const struct trace *trace, int64_t first, int64_t end, struct extremes *all,
                  struct err *err)
{
    float samples[2 * OVERVIEW_BLOCK], low = INFINITY, high = -INFINITY;
    int failed = first < end ? growing_read(trace, first, end - first, samples, err) : ERR_OK;
    if (failed || first >= end)
        return failed;
    widen_extremes(samples, end - first, &low, &high);
    if (low <= high)
        extremes_widen(all, (struct extremes){low, high});
    return ERR_OK;
}

static int growing_minmax(const struct trace *trace, int64_t first, int64_t count, float *low,
                          float *high, struct err *err)
{
    struct growing_trace *channel = self(trace);
    struct extremes all = {NAN, NAN};
    int64_t end = first + count;
    int64_t first_block = ceil_div(first, OVERVIEW_BLOCK), end_block = end / OVERVIEW_BLOCK;
    int failed;
    if (first_block >= end_block) {
        failed = direct(trace, first, end, &all, err);
    } else {
        struct extremes_levels levels = {block_at, channel, {-1, -1, -1}};
        failed = direct(trace, first, first_block * OVERVIEW_BLOCK, &all, err);
        if (!failed)
            failed = direct(trace, end_block * OVERVIEW_BLOCK, end, &all, err);
        (void)pthread_mutex_lock(&channel->growing->lock);
        extremes_gather(&levels, first_block, end_block, &all);
        (void)pthread_mutex_unlock(&channel->growing->lock);
    }
    if (failed)
        return failed;
    *low = all.low;
    *high = all.high;
    return ERR_OK;
}

/* Its channel's memory goes with growing_free(). */
static void trace_stays(struct trace *trace)
{
    (void)trace;
}

static const struct trace_ops growing_ops = {growing_read, growing_minmax, trace_stays};

struct trace *growing_trace(struct growing *growing, size_t channel)
{
    return &growing->channels[channel].trace;
}

int64_t growing_samples(struct growing *growing, size_t channel)
{
    (void)pthread_mutex_lock(&growing->lock);
    int64_t total = growing->channels[channel].total;
    (void)pthread_mutex_unlock(&growing->lock);
    return total;
}

/* ---- refreshing ---- */

/* Room for the runs there are now; a few more may begin before the lock is taken again. */
static int reserve_runs(struct growing *growing, size_t count, struct err *err)
{
    int failed = ERR_OK;
    for (size_t i = 0; i < growing->channel_count && !failed; i++) {
        struct growing_trace *channel = &growing->channels[i];
        failed = array_reserve((void **)&channel->own, &channel->own_room, count,
                               sizeof *channel->own, err);
        if (!failed)
            failed = array_reserve((void **)&channel->laid, &channel->laid_room, count,
                                   sizeof *channel->laid, err);
        channel->trace.runs = channel->laid;
    }
    return failed;
}

/* The runs of a channel that have samples, on recording time; the caller holds the lock. */
static void take_runs(const struct growing *growing, size_t index, size_t count)
{
    struct growing_trace *channel = &growing->channels[index];
    channel->run_count = 0;
    channel->samples = 0;
    for (size_t i = 0; i < count; i++) {
        const struct growing_run_start *start = &growing->starts[i];
        int64_t first = start->first[index];
        int64_t end = i + 1 < growing->start_count ? start[1].first[index] : channel->total;
        double span_ns = (double)(end - first) * 1e9 / channel->trace.rate_hz;
        if (i + 1 == count)
            channel->samples = end;
        if (end > first)
            channel->own[channel->run_count++] =
                (struct run){start->start_ns, llround(span_ns), first, end - first};
    }
}

int growing_refresh(struct growing *growing, const struct clock_map *map, struct err *err)
{
    (void)pthread_mutex_lock(&growing->lock);
    size_t count = growing->start_count;
    (void)pthread_mutex_unlock(&growing->lock);
    int failed = reserve_runs(growing, count, err);
    if (failed)
        return failed;
    (void)pthread_mutex_lock(&growing->lock);
    for (size_t i = 0; i < growing->channel_count; i++)
        take_runs(growing, i, count);
    (void)pthread_mutex_unlock(&growing->lock);
    for (size_t i = 0; i < growing->channel_count; i++) {
        struct growing_trace *channel = &growing->channels[i];
        clock_map_runs(map, channel->own, channel->run_count, channel->laid);
        channel->trace.run_count = channel->run_count;
        channel->trace.samples = channel->samples;
    }
    return ERR_OK;
}

/* ---- making ---- */

static int make_channel(struct growing *growing, struct growing_trace *channel,
                        const struct growing_channel *spec, struct err *err)
{
    void *ring = NULL;
    if (spec->keep < 2 * OVERVIEW_BLOCK || !(spec->rate_hz > 0))
        return err_set(err, ERR_USAGE, "%s: needs a rate, and a ring of %d samples at least",
                       spec->name, 2 * OVERVIEW_BLOCK);
    int failed = array_new(&ring, (size_t)spec->keep, sizeof *channel->ring, err);
    if (failed)
        return failed;
    channel->ring = ring;
    channel->keep = spec->keep;
    channel->growing = growing;
    channel->name = strdup(spec->name);
    channel->unit = strdup(spec->unit);
    if (!channel->name || !channel->unit)
        return err_memory(err, spec->name);
    for (int i = 0; i < OVERVIEW_LEVELS; i++)
        channel->filling[i] = (struct extremes){NAN, NAN};
    channel->trace = (struct trace){.ops = &growing_ops,
                                    .name = channel->name,
                                    .unit = channel->unit,
                                    .role = spec->role,
                                    .rate_hz = spec->rate_hz};
    return ERR_OK;
}

int growing_new(const struct growing_channel *channels, size_t count,
                const struct growing_past *past, struct growing **out, struct err *err)
{
    void *memory = NULL;
    int failed = array_new_zero(&memory, 1, sizeof(struct growing), err);
    if (failed)
        return failed;
    struct growing *made = memory;
    (void)pthread_mutex_init(&made->lock, NULL);
    made->past = *past;
    failed = array_new_zero(&memory, count, sizeof *made->channels, err);
    if (!failed) {
        made->channels = memory;
        made->channel_count = count;
    }
    for (size_t i = 0; i < count && !failed; i++)
        failed = make_channel(made, &made->channels[i], &channels[i], err);
    if (!failed)
        failed = reserve_runs(made, 1, err);
    if (failed)
        growing_free(made);
    else
        *out = made;
    return failed;
}

void growing_free(struct growing *growing)
{
    if (!growing)
        return;
    for (size_t i = 0; i < growing->channel_count; i++) {
        struct growing_trace *channel = &growing->channels[i];
        for (int k = 0; k < OVERVIEW_LEVELS * CHUNKS; k++)
            free(channel->levels[k / CHUNKS].chunks[k % CHUNKS]);
        free(channel->name);
        free(channel->unit);
        free(channel->ring);
        free(channel->own);
        free(channel->laid);
    }
    for (size_t i = 0; i < growing->start_count; i++)
        free(growing->starts[i].first);
    free(growing->starts);
    free(growing->channels);
    (void)pthread_mutex_destroy(&growing->lock);
    free(growing);
}
