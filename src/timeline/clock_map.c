/*
 * clock_map.c - applying a clock map. Fits nothing.
 */
#include "timeline/clock_map.h"

struct clock_map clock_map_on_trust(int64_t start_civil_ns, int64_t epoch_civil_ns)
{
    bool known = start_civil_ns != NS_NONE && epoch_civil_ns != NS_NONE;
    return (struct clock_map){.offset_ns = known ? start_civil_ns - epoch_civil_ns : 0};
}

static int64_t piece_key(const struct clock_piece *piece, bool by_case)
{
    return by_case ? piece->case_ns : piece->at_ns;
}

/* Index of the piece that a time goes by: the last one that begins at or before it, or the first.
 */
static size_t find(const struct clock_map *map, int64_t at_ns, bool by_case)
{
    size_t low = 0, high = map->piece_count;
    while (low < high) {
        size_t middle = low + (high - low) / 2;
        if (piece_key(&map->pieces[middle], by_case) > at_ns)
            high = middle;
        else
            low = middle + 1;
    }
    return low > 0 ? low - 1 : 0;
}

/* A piece ends where the next begins: what its line says beyond that would put a later time
 * before an earlier one. */
static int64_t hold(const struct clock_map *map, size_t at, int64_t ns, bool by_case)
{
    if (at + 1 >= map->piece_count)
        return ns;
    int64_t end_ns = piece_key(&map->pieces[at + 1], by_case);
    return ns < end_ns ? ns : end_ns;
}

int64_t clock_map_to_case(const struct clock_map *map, int64_t recording_ns)
{
    if (map->piece_count == 0)
        return recording_ns + map->offset_ns;
    size_t at = find(map, recording_ns, false);
    const struct clock_piece *piece = &map->pieces[at];
    int64_t case_ns =
        piece->case_ns + mul_div(recording_ns - piece->at_ns, piece->case_span_ns, piece->span_ns);
    return hold(map, at, case_ns, true);
}

int64_t clock_map_from_case(const struct clock_map *map, int64_t case_ns)
{
    if (map->piece_count == 0)
        return case_ns - map->offset_ns;
    size_t at = find(map, case_ns, true);
    const struct clock_piece *piece = &map->pieces[at];
    /* Rounded up where to_case rounds down: the first recording time that is not before case_ns. */
    int64_t recording_ns =
        piece->at_ns - mul_div(piece->case_ns - case_ns, piece->span_ns, piece->case_span_ns);
    return hold(map, at, recording_ns, false);
}

double clock_piece_drift_ppm(const struct clock_piece *piece)
{
    return (double)(piece->case_span_ns - piece->span_ns) * 1e6 / (double)piece->span_ns;
}

/* The run as its piece lays it. Its end may run into the next piece by the error of either: it
 * stops there, so that runs stay in order. */
static struct run lay(const struct clock_map *map, const struct run *run)
{
    size_t at = find(map, run->start_ns, false);
    const struct clock_piece *piece = &map->pieces[at];
    int64_t start_ns = clock_map_to_case(map, run->start_ns);
    int64_t span_ns = mul_div(run->span_ns, piece->case_span_ns, piece->span_ns);
    bool inside = at + 1 == map->piece_count || run_end_ns(run) <= map->pieces[at + 1].at_ns;
    if (inside)
        span_ns = hold(map, at, start_ns + span_ns, true) - start_ns;
    return (struct run){start_ns, span_ns > 0 ? span_ns : 1, run->first, run->count};
}

void clock_map_runs(const struct clock_map *map, const struct run *runs, size_t count,
                    struct run *out)
{
    for (size_t i = 0; i < count; i++) {
        if (map->piece_count > 0) {
            out[i] = lay(map, &runs[i]);
            continue;
        }
        out[i] = runs[i];
        out[i].start_ns = clock_map_to_case(map, runs[i].start_ns);
    }
}
