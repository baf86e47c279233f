/*
 * extremes.c - the extremes of any stretch of blocks from few of them. Keeps nothing.
 */
#include "trace/extremes.h"

/* At each level the few blocks that do not fill a block of the next one up, the rest from there. */
void extremes_gather(const struct extremes_levels *levels, int64_t first, int64_t end,
                     struct extremes *all)
{
    for (int level = 0; level < OVERVIEW_LEVELS; level++) {
        bool top = level == OVERVIEW_LEVELS - 1;
        while (first < end && (top || first % OVERVIEW_FAN != 0))
            extremes_widen(all, levels->block(levels->context, level, first++));
        bool at_end = end == levels->blocks[level];
        while (first < end && !at_end && end % OVERVIEW_FAN != 0)
            extremes_widen(all, levels->block(levels->context, level, --end));
        if (first >= end)
            return;
        first /= OVERVIEW_FAN;
        end = at_end ? ceil_div(end, OVERVIEW_FAN) : end / OVERVIEW_FAN;
    }
}
