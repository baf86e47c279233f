/*
 * wfdb_header.h - the text header of a WFDB record. For the wfdb reader alone.
 *
 * Source: WFDB Applications Guide, header(5).
 */
#ifndef RECORDING_WFDB_HEADER_H
#define RECORDING_WFDB_HEADER_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "base/arena.h"
#include "base/err.h"

struct wfdb_signal {
    const char *file; /* "~" in a layout segment */
    int format;
    int64_t per_frame; /* samples in a frame */
    int64_t skew;      /* frames of this signal before sample 0 */
    int64_t offset;    /* bytes before the first sample of the file */
    double gain;       /* ADC units in a physical unit */
    double baseline;   /* ADC value of 0 physical units */
    const char *unit;
    int64_t first_value; /* where the differences of format 8 start from */
    const char *description;
};

struct wfdb_segment {
    const char *name; /* "~" is a gap */
    int64_t frames;
};

struct wfdb_header {
    const char *name;
    double rate_hz;              /* frames a second */
    int64_t frames;              /* 0 = not stated */
    int64_t start_civil_ns;      /* NS_NONE without a date */
    int64_t time_of_day_ns;      /* NS_NONE without a time */
    struct wfdb_signal *signals; /* shape (signal_count) */
    size_t signal_count;
    struct wfdb_segment *segments; /* shape (segment_count); 0 = the record has signals itself */
    size_t segment_count;
};

/* `path` goes into errors. Everything lives in the arena. */
MUST_CHECK int wfdb_header_read(const char *text, size_t size, const char *path,
                                struct arena *arena, struct wfdb_header *out, struct err *err);

#endif
