/*
 * train.c - a growing list of events in time order. Finds nothing itself.
 */
#include "trace/train.h"

#include <stdlib.h>

#include "base/array.h"

int train_add(struct train *train, int64_t time_ns, float value, uint8_t flags, struct err *err)
{
    if (train->count > 0 && time_ns <= train->events[train->count - 1].time_ns)
        return err_set(err, ERR_USAGE, "an event train must rise in time; a method is at fault");
    int failed = array_reserve((void **)&train->events, &train->room, train->count + 1,
                               sizeof *train->events, err);
    if (!failed)
        train->events[train->count++] = (struct train_event){time_ns, value, flags};
    return failed;
}

void train_free(struct train *train)
{
    free(train->events);
    *train = (struct train){0};
}

size_t train_find(const struct train *train, int64_t at_ns)
{
    size_t low = 0, high = train->count;
    while (low < high) {
        size_t middle = low + (high - low) / 2;
        if (train->events[middle].time_ns >= at_ns)
            high = middle;
        else
            low = middle + 1;
    }
    return low;
}
