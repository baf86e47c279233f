/*
 * overview.c - building an overview on background threads, and answering from it meanwhile. The
 * file it is kept in is overview_file.c's.
 *
 * A chunk is one block of the top level with all that is below it: no chunk needs another, so that
 * builders only share the counter of what is next. A chunk's flag is stored (release) after its
 * blocks and loaded (acquire) before they are read.
 */
#include "trace/overview.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "trace/overview_impl.h"

static const int64_t chunk_samples =
    (int64_t)OVERVIEW_BLOCK * OVERVIEW_FAN * OVERVIEW_FAN; /* fan ^ (levels - 1) */
_Static_assert(OVERVIEW_LEVELS == 3, "chunk_samples is written for three levels");

/* ---- building ---- */

static void remember(struct overview *overview, const struct err *why)
{
    (void)pthread_mutex_lock(&overview->lock);
    if (!overview->why.code)
        overview->why = *why;
    (void)pthread_mutex_unlock(&overview->lock);
}

static void fold(const struct overview *overview, const struct overview_channel *channel, int level,
                 int64_t first, int64_t end)
{
    const struct extremes *below = overview->blocks + channel->at[level - 1];
    struct extremes *out = overview->blocks + channel->at[level];
    for (int64_t block = first; block < end; block++) {
        struct extremes all = {NAN, NAN};
        int64_t from = block * OVERVIEW_FAN, to = from + OVERVIEW_FAN;
        to = to < channel->blocks[level - 1] ? to : channel->blocks[level - 1];
        for (int64_t i = from; i < to; i++)
            extremes_widen(&all, below[i]);
        out[block] = all;
    }
}

static int build_chunk(struct overview *overview, size_t index, int64_t chunk, struct err *err)
{
    const struct overview_channel *channel = &overview->channels[index];
    struct extremes *out = overview->blocks + channel->at[0];
    int64_t first = chunk * chunk_samples, end = first + chunk_samples;
    end = end < channel->samples ? end : channel->samples;
    for (int64_t at = first; at < end; at += OVERVIEW_BLOCK) {
        int64_t count = end - at < OVERVIEW_BLOCK ? end - at : OVERVIEW_BLOCK;
        struct extremes *block = &out[at / OVERVIEW_BLOCK];
        int failed =
            recording_minmax(overview->recording, index, at, count, &block->low, &block->high, err);
        if (failed)
            return failed;
    }
    int64_t size = OVERVIEW_BLOCK;
    for (int level = 1; level < OVERVIEW_LEVELS; level++) {
        size *= OVERVIEW_FAN;
        fold(overview, channel, level, first / size, ceil_div(end, size));
    }
    atomic_store_explicit(&overview->ready[channel->first_chunk + (size_t)chunk], 1,
                          memory_order_release);
    atomic_fetch_add_explicit(&overview->done, end - first, memory_order_relaxed);
    return ERR_OK;
}

/* Takes chunks in time order, all channels of a stretch together: their samples lie together in
 * the file. */
static void build(struct overview *overview)
{
    int64_t channels = (int64_t)overview->channel_count, work = overview->rounds * channels;
    struct err err = {0};
    while (!atomic_load_explicit(&overview->stop, memory_order_relaxed)) {
        int64_t item = atomic_fetch_add_explicit(&overview->next, 1, memory_order_relaxed);
        if (item >= work)
            break;
        size_t index = (size_t)(item % channels);
        int64_t chunk = item / channels;
        if (chunk < overview->channels[index].chunks && build_chunk(overview, index, chunk, &err)) {
            remember(overview, &err);
            break;
        }
    }
}

/* Whoever closes an overview does not wait for a file that can be built again. */
static void finish(struct overview *overview)
{
    struct err err = {0};
    bool whole = atomic_load(&overview->done) == overview->total && !atomic_load(&overview->stop);
    if (whole && overview->path && overview_file_save(overview, &err))
        remember(overview, &err);
}

static void all_ready(struct overview *overview)
{
    for (size_t i = 0; i < overview->chunk_count; i++)
        atomic_store_explicit(&overview->ready[i], 1, memory_order_release);
    atomic_store_explicit(&overview->done, overview->total, memory_order_relaxed);
}

static void *builder(void *context)
{
    struct overview *overview = context;
    build(overview);
    if (atomic_fetch_sub(&overview->working, 1) == 1)
        finish(overview);
    return NULL;
}

/* Starts the other builders only when there is no file to load: reading it back is quicker. */
static void *first_builder(void *context)
{
    struct overview *overview = context;
    if (overview->path && overview_file_load(overview)) {
        all_ready(overview);
        atomic_store(&overview->working, 0);
        return NULL;
    }
    for (int i = 1; i < overview->thread_count; i++) {
        if (pthread_create(&overview->threads[i], NULL, builder, overview) != 0) {
            /* One thread fewer builds more slowly and just as well. */
            atomic_fetch_sub(&overview->working, overview->thread_count - i);
            overview->thread_count = i;
        }
    }
    return builder(overview);
}

/* ---- opening ---- */

static int lay_out(struct overview *overview, struct err *err)
{
    const struct recording_info *info = recording_info(overview->recording);
    void *memory = NULL;
    int failed = array_new_zero(&memory, info->channel_count, sizeof *overview->channels, err);
    if (failed)
        return failed;
    overview->channels = memory;
    overview->channel_count = info->channel_count;
    for (size_t i = 0; i < info->channel_count; i++) {
        struct overview_channel *channel = &overview->channels[i];
        channel->samples = info->channels[i].samples;
        int64_t size = OVERVIEW_BLOCK;
        for (int level = 0; level < OVERVIEW_LEVELS; level++, size *= OVERVIEW_FAN) {
            channel->blocks[level] = ceil_div(channel->samples, size);
            channel->at[level] = overview->block_count;
            overview->block_count += (size_t)channel->blocks[level];
        }
        channel->chunks = channel->blocks[OVERVIEW_LEVELS - 1];
        channel->first_chunk = overview->chunk_count;
        overview->chunk_count += (size_t)channel->chunks;
        overview->total += channel->samples;
        if (channel->chunks > overview->rounds)
            overview->rounds = channel->chunks;
    }
    failed = array_new(&memory, overview->block_count, sizeof *overview->blocks, err);
    if (failed)
        return failed;
    overview->blocks = memory;
    failed = array_new_zero(&memory, overview->chunk_count, sizeof *overview->ready, err);
    if (!failed)
        overview->ready = memory;
    return failed;
}

static void overview_free(struct overview *overview)
{
    free(overview->channels);
    free(overview->blocks);
    free((void *)overview->ready);
    free(overview->threads);
    free(overview->path);
    (void)pthread_mutex_destroy(&overview->lock);
    free(overview);
}

static int start(struct overview *overview, int threads, struct err *err)
{
    void *memory = NULL;
    overview->thread_count = threads > 0 ? threads : 1;
    int failed =
        array_new_zero(&memory, (size_t)overview->thread_count, sizeof *overview->threads, err);
    if (failed)
        return failed;
    overview->threads = memory;
    atomic_store(&overview->working, overview->thread_count);
    if (pthread_create(&overview->threads[0], NULL, first_builder, overview) != 0)
        return err_set(err, ERR_MEMORY, "cannot start a thread for the overview");
    return ERR_OK;
}

int overview_open(const struct recording *recording, const char *digest, const char *path,
                  int threads, struct overview **out, struct err *err)
{
    void *memory = NULL;
    int failed = array_new_zero(&memory, 1, sizeof(struct overview), err);
    if (failed)
        return failed;
    struct overview *made = memory;
    (void)pthread_mutex_init(&made->lock, NULL);
    made->recording = recording;
    (void)strncat(made->digest, digest, sizeof made->digest - 1);
    made->path = path ? strdup(path) : NULL;
    failed = path && !made->path ? err_memory(err, path) : lay_out(made, err);
    if (!failed)
        failed = start(made, threads, err);
    if (failed)
        overview_free(made);
    else
        *out = made;
    return failed;
}

/* The first builder goes first: until it has ended it may still start the others. */
void overview_wait(struct overview *overview)
{
    if (overview->threads[0])
        (void)pthread_join(overview->threads[0], NULL);
    overview->threads[0] = 0;
    for (int i = 1; i < overview->thread_count; i++) {
        if (overview->threads[i])
            (void)pthread_join(overview->threads[i], NULL);
        overview->threads[i] = 0;
    }
}

void overview_close(struct overview *overview)
{
    if (!overview)
        return;
    atomic_store(&overview->stop, true);
    overview_wait(overview);
    overview_free(overview);
}

/* ---- answering ---- */

static bool built(const struct overview *overview, const struct overview_channel *channel,
                  int64_t first, int64_t end)
{
    for (int64_t chunk = first / chunk_samples; chunk * chunk_samples < end; chunk++) {
        if (!atomic_load_explicit(&overview->ready[channel->first_chunk + (size_t)chunk],
                                  memory_order_acquire))
            return false;
    }
    return true;
}

struct place {
    const struct overview *overview;
    const struct overview_channel *channel;
};

static struct extremes block_at(const void *context, int level, int64_t index)
{
    const struct place *place = context;
    return place->overview->blocks[place->channel->at[level] + (size_t)index];
}

static void gather(const struct overview *overview, const struct overview_channel *channel,
                   int64_t first, int64_t end, struct extremes *all)
{
    struct place place = {overview, channel};
    struct extremes_levels levels = {.block = block_at, .context = &place};
    memcpy(levels.blocks, channel->blocks, sizeof levels.blocks);
    extremes_gather(&levels, first, end, all);
}

static bool direct(const struct overview *overview, size_t channel, int64_t first, int64_t end,
                   struct extremes *all)
{
    struct extremes some = {NAN, NAN};
    if (first >= end)
        return true;
    if (recording_minmax(overview->recording, channel, first, end - first, &some.low, &some.high,
                         NULL))
        return false;
    extremes_widen(all, some);
    return true;
}

enum overview_answer overview_minmax(const struct overview *overview, size_t channel, int64_t first,
                                     int64_t count, float *low, float *high)
{
    const struct overview_channel *at = &overview->channels[channel];
    struct extremes all = {NAN, NAN};
    int64_t end = first + count;
    int64_t first_block = ceil_div(first, OVERVIEW_BLOCK);
    int64_t end_block = end == at->samples ? at->blocks[0] : end / OVERVIEW_BLOCK;
    if (first_block >= end_block) {
        if (!direct(overview, channel, first, end, &all))
            return OVERVIEW_PENDING;
    } else {
        if (!built(overview, at, first_block * OVERVIEW_BLOCK, end) ||
            !direct(overview, channel, first, first_block * OVERVIEW_BLOCK, &all) ||
            !direct(overview, channel, end_block * OVERVIEW_BLOCK, end, &all))
            return OVERVIEW_PENDING;
        gather(overview, at, first_block, end_block, &all);
    }
    *low = all.low;
    *high = all.high;
    return OVERVIEW_EXACT;
}

void overview_progress(const struct overview *overview, int64_t *done, int64_t *total,
                       struct err *why)
{
    pthread_mutex_t *lock = (pthread_mutex_t *)(uintptr_t)&overview->lock;
    *done = atomic_load_explicit(&overview->done, memory_order_relaxed);
    *total = overview->total;
    (void)pthread_mutex_lock(lock);
    *why = overview->why;
    (void)pthread_mutex_unlock(lock);
}
