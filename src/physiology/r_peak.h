/*
 * r_peak.h - where in a QRS the R peak is, between the samples.
 */
#ifndef PHYSIOLOGY_R_PEAK_H
#define PHYSIOLOGY_R_PEAK_H

#include <stdbool.h>
#include <stdint.h>

#include "base/err.h"
#include "base/ns.h"
#include "trace/trace.h"

#define R_PEAK_REACH_NS  (50 * NS_PER_MS)  /* looked for this far to each side */
#define R_PEAK_MARGIN_NS (150 * NS_PER_MS) /* read beyond that, for the filter and the baseline */

/* One lead's finder: remembers which way its QRS points, so that a complex with R and S alike does
 * not jump from one to the other. */
struct r_peak {
    const struct trace *trace;
    float *samples;  /* shape (room): the samples around one beat */
    double *scratch; /* shape (room) */
    int64_t room;
    double up, down; /* running heights of what points up and down, in the lead's unit */
};

/* The trace must outlive the finder. */
MUST_CHECK int r_peak_init(struct r_peak *finder, const struct trace *trace, struct err *err);
void r_peak_fini(struct r_peak *finder);

/* The extreme nearest to what the lead's beats show, within R_PEAK_REACH_NS of about_ns: its time,
 * and its height above the baseline around. *found is false when no sample is there. */
MUST_CHECK int r_peak_find(struct r_peak *finder, int64_t about_ns, int64_t *at_ns, float *height,
                           bool *found, struct err *err);

#endif
