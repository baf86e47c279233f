/*
 * arrival.h - the clock of a stream against the laptop's, fitted while it runs.
 *
 * Samples leave the device evenly by its own crystal and arrive late by a delay that is never
 * negative and often small: arrival(n) = a + b n + delay(n). The line under all arrivals that lies
 * closest to them is the clock (lower envelope, by linear programming over the lower convex hull;
 * the idea of one-way delay trend removal by convex hull: Moon, Skelly and Towsley, INFOCOM 1999;
 * Zhang, Liu and Xia, INFOCOM 2002). What cannot be told from one direction is the least delay
 * itself: it stays in the offset.
 *
 * The stated error (clock_piece.error_ns) is the root of the sum of three squares:
 *   - how far above the line the least arrival of a stretch of time lies, on average over n (up to
 *     ARRIVAL_BINS) equal stretches, over the root of n: the link's own measure of how near to its
 *     best it comes, and so of how far the line can be off;
 *   - while the slope is held at 1: ARRIVAL_CRYSTAL_PPM of the stretch so far;
 *   - ARRIVAL_LEAST_NS for the least delay, which a link within a room is taken to keep below.
 *
 * Constant memory: a hull that grows too long is thinned downwards, so that the line stays under
 * every arrival there ever was.
 */
#ifndef TIMELINE_ARRIVAL_H
#define TIMELINE_ARRIVAL_H

#include <stdbool.h>
#include <stdint.h>

#include "timeline/clock_map.h"

enum { ARRIVAL_HULL_MOST = 512, ARRIVAL_BINS = 64, ARRIVAL_CRYSTAL_PPM = 100 };
#define ARRIVAL_LEAST_NS NS_PER_MS

/* late_ns: boottime - own time, less that of the first point. */
struct arrival_point {
    int64_t own_ns, late_ns;
};

/* Caller-owned; zeroed is empty and ready. One a stretch. */
struct arrival_fit {
    struct arrival_point hull[ARRIVAL_HULL_MOST + 1]; /* lower convex hull, rising in own_ns */
    int count;
    int64_t first_own_ns, last_own_ns, first_boottime_ns;
    int64_t points;
    double own_sum_s; /* about first_own_ns: where the data's weight lies */
    /* The least arrival of each stretch of bin_ns, by the slope that was known when it came;
     * own_ns NS_NONE = none yet. */
    struct arrival_point least[ARRIVAL_BINS];
    int64_t bin_ns;
    double slope; /* late_ns a ns of own time, as last fitted */
};

/* Samples up to own_ns (nominal rate) had arrived at boottime_ns. own_ns never falls. Amortised
 * constant time. */
void arrival_add(struct arrival_fit *fit, int64_t own_ns, int64_t boottime_ns);

/* The fit so far, as a piece from the first point on whose case times are boottimes plus
 * case_minus_boottime_ns. A slope far from 1 is followed: the rate that a stream is said to have
 * may be wrong, or a recording played faster. false when nothing has come. */
bool arrival_piece(const struct arrival_fit *fit, int64_t case_minus_boottime_ns,
                   struct clock_piece *out);

/* The same arrivals with own times less by_ns: own time is counted from elsewhere from now on. */
void arrival_shift(struct arrival_fit *fit, int64_t by_ns);

/* Whether the stretch is long enough for its link to tell a drift: from 30 s on, or from 5 s on one
 * that no crystal has. Until then the slope is 1. */
bool arrival_tells_drift(const struct arrival_fit *fit);

#endif
