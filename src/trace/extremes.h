/*
 * extremes.h - extremes of blocks of samples, level on level: what an overview and growing samples
 * share. Level 0 holds the extremes of OVERVIEW_BLOCK samples each, each further level of
 * OVERVIEW_FAN blocks of the one below. Where the blocks lie in memory is their owner's matter.
 */
#ifndef TRACE_EXTREMES_H
#define TRACE_EXTREMES_H

#include <math.h>
#include <stdbool.h>
#include <stdint.h>

#include "trace/overview.h"

struct extremes {
    float low, high; /* both NaN: no valid sample in the block */
};

static inline void extremes_widen(struct extremes *all, struct extremes block)
{
    /* fmin and fmax leave a NaN out when the other is a number. */
    all->low = fminf(all->low, block.low);
    all->high = fmaxf(all->high, block.high);
}

static inline int64_t ceil_div(int64_t a, int64_t b)
{
    return (a + b - 1) / b;
}

struct extremes_levels {
    struct extremes (*block)(const void *context, int level, int64_t index);
    const void *context;
    /* How many blocks a level has when its last one may be short: its parent covers it, short as
     * well. -1 when only whole blocks are kept. */
    int64_t blocks[OVERVIEW_LEVELS];
};

/* Widens `all` by the level-0 blocks [first, end), which must be there. */
void extremes_gather(const struct extremes_levels *levels, int64_t first, int64_t end,
                     struct extremes *all);

#endif
