/*
 * play_format.h - from channels to the bytes that a device sends: a header, then packets of 40 ms.
 *
 * BDF+: a packet is a record; the first signals, then the time-keeping one. Lines: `t` and one
 * value a channel, at the greatest rate of all; a slower channel's value is repeated until its
 * next.
 */
#ifndef DEMO_PLAY_FORMAT_H
#define DEMO_PLAY_FORMAT_H

#include <stdbool.h>
#include <stdint.h>

#include "base/str.h"

enum { PACKET_MS = 40, PACKETS_PER_S = 1000 / PACKET_MS };

struct play_channel {
    const char *label, *unit, *transducer;
    double physical_min, physical_max;
    int rate_hz; /* a multiple of PACKETS_PER_S */
    /* Sample k is samples[k], or, when period > 0, samples[k * stride % period]. */
    const float *samples;
    size_t stride, period;
};

struct play_stream {
    const struct play_channel *channels; /* shape (count) */
    size_t count;
    bool gaps; /* are packets left out? */
};

struct play_format {
    const char *name;
    /* Both append. */
    int (*header)(const struct play_stream *stream, struct str *out, struct err *err);
    void (*packet)(const struct play_stream *stream, int64_t packet, struct str *out);
};

extern const struct play_format play_lines, play_bdf;

#endif
