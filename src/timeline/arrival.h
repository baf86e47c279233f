/*
 * arrival.h - the clock of a stream against the laptop's, fitted while it runs.
 *
 * Samples leave the device evenly by its own crystal and arrive late by a delay that is never
 * negative and often small: arrival(n) = a + b n + delay(n). The line under all arrivals that lies
 * closest to them is the clock (lower envelope, by linear programming over the lower convex hull;
 * the idea of one-way delay trend removal by convex hull: Moon, Skelly and Towsley, INFOCOM 1999;
 * Zhang, Liu and Xia, INFOCOM 2002). What cannot be told from one direction is the least delay
 * itself: it stays in the offset, and is part of the stated error.
 *
 * Constant memory: the hull is thinned as it grows.
 */
#ifndef TIMELINE_ARRIVAL_H
#define TIMELINE_ARRIVAL_H

#include <stdbool.h>
#include <stdint.h>

#include "timeline/clock_map.h"

enum { ARRIVAL_HULL_MOST = 512 };

struct arrival_point {
    int64_t own_ns, boottime_ns;
};

/* Caller-owned; zeroed is empty and ready. One a stretch. */
struct arrival_fit {
    struct arrival_point hull[ARRIVAL_HULL_MOST]; /* lower convex hull, rising in own_ns */
    int count;
    int64_t first_own_ns, last_own_ns, last_boottime_ns;
    int64_t points;
    double own_sum_s, own_square_sum; /* about first_own_ns: where the data's weight lies */
};

/* Samples up to own_ns (nominal rate) had arrived at boottime_ns. own_ns never falls. Amortised
 * constant time. */
void arrival_add(struct arrival_fit *fit, int64_t own_ns, int64_t boottime_ns);

/* The fit so far, as a piece from the first point on whose case times are boottimes plus
 * case_minus_boottime_ns. Until the stretch is long enough to tell a drift (some tens of seconds)
 * the slope is 1. Drifts beyond 1000 ppm are held there. false when nothing has come. */
bool arrival_piece(const struct arrival_fit *fit, int64_t case_minus_boottime_ns,
                   struct clock_piece *out);

#endif
