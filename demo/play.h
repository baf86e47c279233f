/*
 * play.h - a device's channels sent as they would come during the operation, and what happens said
 * beside it.
 *
 * Begins with the first reader, then goes by CLOCK_MONOTONIC whoever reads. Each new reader gets
 * the header first, and then what comes from where the play is. A reader that is slow makes the
 * play wait; it catches up afterwards.
 */
#ifndef DEMO_PLAY_H
#define DEMO_PLAY_H

#include "play_format.h"
#include "play_target.h"
#include "scenario.h"

struct play {
    struct play_stream stream;
    const struct play_format *format;
    const struct scenario *scenario; /* said on standard output, its gap left out; NULL = none */
    double length_s;
    double speed;     /* > 0; 1 = real time */
    double drift_ppm; /* > 0: the device's clock is slow */
    double burst_s;   /* packets are held and sent every so often; 0 = as they come */
};

/* Until the end. Fails only when the header cannot be made or memory runs out. */
MUST_CHECK int play_run(const struct play *play, struct play_target *target, struct err *err);

#endif
