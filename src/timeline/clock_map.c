/*
 * clock_map.c - applying a clock map. Fits nothing.
 */
#include "timeline/clock_map.h"

struct clock_map clock_map_on_trust(int64_t start_civil_ns, int64_t epoch_civil_ns)
{
    bool known = start_civil_ns != NS_NONE && epoch_civil_ns != NS_NONE;
    return (struct clock_map){.offset_ns = known ? start_civil_ns - epoch_civil_ns : 0};
}

int64_t clock_map_to_case(const struct clock_map *map, int64_t recording_ns)
{
    return recording_ns + map->offset_ns;
}

int64_t clock_map_from_case(const struct clock_map *map, int64_t case_ns)
{
    return case_ns - map->offset_ns;
}

void clock_map_runs(const struct clock_map *map, const struct run *runs, size_t count,
                    struct run *out)
{
    for (size_t i = 0; i < count; i++) {
        out[i] = runs[i];
        out[i].start_ns = clock_map_to_case(map, runs[i].start_ns);
    }
}
