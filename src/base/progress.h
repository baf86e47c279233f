/*
 * progress.h - how far a long job is, and whether to stop it: two atomics, shared by threads.
 *
 * The worker calls progress_add() now and then and stops with ERR_CANCELLED when
 * progress_cancelled() says so. The watcher reads done/total whenever it likes. NULL is allowed
 * everywhere and means that nobody watches.
 */
#ifndef BASE_PROGRESS_H
#define BASE_PROGRESS_H

#include <stdatomic.h>
#include <stdbool.h>
#include <stdint.h>

struct progress {
    _Atomic int64_t done, total; /* in the job's own unit: bytes, samples, windows */
    atomic_bool cancelled;
};

static inline void progress_total(struct progress *progress, int64_t total)
{
    if (progress)
        atomic_store_explicit(&progress->total, total, memory_order_relaxed);
}

static inline void progress_add(struct progress *progress, int64_t more)
{
    if (progress)
        atomic_fetch_add_explicit(&progress->done, more, memory_order_relaxed);
}

static inline bool progress_cancelled(struct progress *progress)
{
    return progress && atomic_load_explicit(&progress->cancelled, memory_order_relaxed);
}

#endif
