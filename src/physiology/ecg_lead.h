/*
 * ecg_lead.h - one ECG lead as the beat detector sees it: slopes in the band of the QRS, on a grid
 * of 5 ms that is the same for every lead, whatever its sampling rate.
 *
 * A tick is a point of that grid: tick k is at origin + k * ECG_TICK_NS. Ticks are made in order,
 * one bin (2 s) at a time, and the lead keeps the last bins at hand:
 *
 *      ticks, features     [ bin - 1 | bin | bin + 1 ... bin + ECG_AHEAD ]
 *      height, floor       bins bin - ECG_AHEAD ... bin + ECG_AHEAD
 *
 * so that how high a QRS stands in this lead, and how much lies between, is known from both sides.
 * Memory does not grow with the length of the recording. Samples are read and filtered in blocks
 * whose size changes nothing.
 */
#ifndef PHYSIOLOGY_ECG_LEAD_H
#define PHYSIOLOGY_ECG_LEAD_H

#include <stddef.h>
#include <stdint.h>

#include "base/err.h"
#include "base/ns.h"
#include "dsp/biquad.h"
#include "trace/trace.h"

#define ECG_TICK_NS (5 * NS_PER_MS)

enum {
    ECG_BIN = 400, /* ticks */
    ECG_AHEAD = 4, /* bins looked ahead, and back */
    ECG_SPAN = ECG_BIN * (ECG_AHEAD + 2),
    ECG_WINDOW = 24, /* ticks of the moving mean: 120 ms */
    ECG_LAG = 15,    /* ticks from the middle of a QRS to the peak of its feature */
    ECG_BLOCK = 4096,
    ECG_BLOCK_MAX = 65536,
    ECG_LEAST_RATE_HZ = 90,
};

struct ecg_lead {
    const struct trace *trace;
    int64_t origin_ns;

    /* Filtered samples at hand: held_count from number held_first, all in one run. */
    struct filter filter;
    float *held; /* shape (block + 1): the last of the block before, then a block */
    int64_t block, held_first, held_count;
    size_t run;
    int64_t bridge, missing; /* missing samples in a row: at most bridged, seen so far */
    float last_input;

    int64_t next_tick, empty_ticks; /* made so far; missing ones among them at the end */
    float *band;                    /* shape (4 + ECG_BIN): the filtered signal at ticks */
    float *slope;                   /* shape (ECG_SPAN): |slope|, lead's unit a tick */
    float *feature; /* shape (ECG_SPAN): mean of slope over the last ECG_WINDOW ticks */
    float height[2 * ECG_AHEAD + 1], floor[2 * ECG_AHEAD + 1]; /* of feature; NaN = none */
};

/* Stands before the first bin. `block`, at most ECG_BLOCK_MAX, is how many samples are read at a
 * time. The trace must outlive the lead. */
MUST_CHECK int ecg_lead_init(struct ecg_lead *lead, const struct trace *trace, int64_t origin_ns,
                             int64_t block, struct err *err);
void ecg_lead_fini(struct ecg_lead *lead);

/* Moves on by one bin: what was bin + 1 becomes bin. After ecg_lead_init(), ECG_AHEAD + 1 calls
 * bring the first bin to its place. */
MUST_CHECK int ecg_lead_advance(struct ecg_lead *lead, struct err *err);

/* How many bins from here on hold nothing, known only when all that is kept is missing; INT64_MAX
 * when nothing follows. Skipping up to that many changes nothing but the time it takes. */
int64_t ecg_lead_idle_bins(const struct ecg_lead *lead);
void ecg_lead_skip(struct ecg_lead *lead, int64_t bins);

/* Of the bin in place: how high the feature rises at a QRS, and its middle level: medians over the
 * bins on both sides; both NaN when the lead is missing all around. */
void ecg_lead_levels(const struct ecg_lead *lead, double *height, double *floor);

#endif
