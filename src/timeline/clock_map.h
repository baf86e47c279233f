/*
 * clock_map.h - from a recording's own time to case time.
 *
 * Without any sync pair the wall clocks are taken on trust: the map is an offset, and says that
 * it is unaligned. case_ns = offset_ns + recording_ns * rate.num / rate.den would carry drift;
 * this version holds the offset alone. Changing a map never changes a stamp.
 */
#ifndef TIMELINE_CLOCK_MAP_H
#define TIMELINE_CLOCK_MAP_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "base/err.h"
#include "recording/run.h"

struct clock_map {
    int64_t offset_ns; /* case time of recording time 0 */
    bool aligned;      /* false: wall clocks on trust */
};

/* A recording that starts at start_civil_ns in a case whose epoch is epoch_civil_ns; NS_NONE as
 * start (the file does not say) puts it at the epoch. */
struct clock_map clock_map_on_trust(int64_t start_civil_ns, int64_t epoch_civil_ns);

int64_t clock_map_to_case(const struct clock_map *map, int64_t recording_ns);
int64_t clock_map_from_case(const struct clock_map *map, int64_t case_ns);

/* Lays `count` runs on case time, into out, shape (count). */
void clock_map_runs(const struct clock_map *map, const struct run *runs, size_t count,
                    struct run *out);

#endif
