/*
 * overview_impl.h - what an overview is made of. For overview.c and overview_file.c alone.
 */
#ifndef TRACE_OVERVIEW_IMPL_H
#define TRACE_OVERVIEW_IMPL_H

#include <pthread.h>
#include <stdatomic.h>

#include "trace/extremes.h"

struct overview_channel {
    int64_t samples;
    int64_t blocks[OVERVIEW_LEVELS];
    size_t at[OVERVIEW_LEVELS]; /* index of a level's first block in overview.blocks */
    int64_t chunks;             /* one chunk is one block of the top level */
    size_t first_chunk;         /* index into overview.ready */
};

struct overview {
    const struct recording *recording;
    char digest[DIGEST_TEXT_SIZE];
    char *path; /* NULL = memory only */
    struct overview_channel *channels;
    size_t channel_count;
    struct extremes *blocks; /* all levels of all channels, shape (block_count) */
    size_t block_count;
    _Atomic unsigned char *ready; /* a flag a chunk, shape (chunk_count): set after its blocks */
    size_t chunk_count;
    int64_t rounds;       /* most chunks any channel has */
    _Atomic int64_t next; /* next piece of work: round * channel_count + channel */
    _Atomic int64_t done; /* samples */
    int64_t total;
    atomic_bool stop;
    atomic_int working; /* builders still at it */
    pthread_t *threads;
    int thread_count;
    pthread_mutex_t lock; /* guards `why` */
    struct err why;
};

/* Fills the blocks from the file at overview->path; true when it fits the recording and its own
 * digest matches. Blocks may hold anything after false. */
bool overview_file_load(struct overview *overview);
/* Writes the file, whole or not at all. */
MUST_CHECK int overview_file_save(const struct overview *overview, struct err *err);

#endif
