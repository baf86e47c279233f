/*
 * clock_map.h - from a recording's own time to case time.
 *
 * Without any sync pair the wall clocks are taken on trust: the map is an offset, and says that
 * it is unaligned. Otherwise it is made of straight pieces, one for each stretch in which the
 * recorder's clock ran undisturbed: an offset and a drift. Changing a map never changes a stamp.
 */
#ifndef TIMELINE_CLOCK_MAP_H
#define TIMELINE_CLOCK_MAP_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "base/err.h"
#include "recording/run.h"

/* From at_ns on, span_ns of recording time are case_span_ns of case time (both > 0):
 * case = case_ns + (recording - at_ns) * case_span_ns / span_ns, as an exact rational. */
struct clock_piece {
    int64_t at_ns, span_ns;
    int64_t case_ns, case_span_ns;
    int64_t error_ns; /* standard error of the case time in this piece */
};

struct clock_map {
    int64_t offset_ns; /* without pieces: case time of recording time 0 */
    bool aligned;      /* false: wall clocks on trust */
    /* Rising in at_ns and in case_ns; a time before the first goes by the first. Not owned: they
     * live as long as whoever made the map says. NULL when there are none. */
    const struct clock_piece *pieces;
    size_t piece_count;
};

/* A recording that starts at start_civil_ns in a case whose epoch is epoch_civil_ns; NS_NONE as
 * start (the file does not say) puts it at the epoch. */
struct clock_map clock_map_on_trust(int64_t start_civil_ns, int64_t epoch_civil_ns);

/* Both never fall. A time that a piece's line puts beyond the start of the next piece is held
 * there. from_case gives the first recording time that is not before case_ns: to_case and back is
 * the same time wherever a piece does not shrink time, and at most some ns earlier where it does.
 */
int64_t clock_map_to_case(const struct clock_map *map, int64_t recording_ns);
int64_t clock_map_from_case(const struct clock_map *map, int64_t case_ns);

/* Drift of a piece in parts per million: positive when the recorder's clock is slow. */
double clock_piece_drift_ppm(const struct clock_piece *piece);

/* Lays `count` runs on case time, into out, shape (count). A run goes by the piece it starts in
 * (a recorder that is restarted begins a new run). */
void clock_map_runs(const struct clock_map *map, const struct run *runs, size_t count,
                    struct run *out);

#endif
