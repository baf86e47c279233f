/*
 * train.h - an event train: instants that a method found (R peaks, pressure beats, breaths).
 *
 * Plain data: times in case time, rising; a value and a flag each. Caller-owned; train_free().
 */
#ifndef TRACE_TRAIN_H
#define TRACE_TRAIN_H

#include <stddef.h>
#include <stdint.h>

#include "base/err.h"

enum train_flag {
    TRAIN_NORMAL = 0,
    TRAIN_DOUBTFUL = 1, /* low confidence: shown, counted, not used for variability */
    TRAIN_GAP = 2,      /* first event after a stretch that could not be searched: the interval
                           before it is not an interval */
};

struct train_event {
    int64_t time_ns; /* case time */
    float value;     /* the method's own: amplitude in the channel's unit */
    uint8_t flags;   /* enum train_flag, or-ed */
};

struct train {
    struct train_event *events; /* shape (count), time_ns strictly rising */
    size_t count, room;
};

MUST_CHECK int train_add(struct train *train, int64_t time_ns, float value, uint8_t flags,
                         struct err *err);
void train_free(struct train *train);

/* Index of the first event at or after at_ns; count when there is none. */
size_t train_find(const struct train *train, int64_t at_ns);

#endif
