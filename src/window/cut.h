/*
 * cut.h - a stretch of any trace on an even grid: what a window is filled with.
 *
 * Even traces go through a windowed-sinc resampler (dsp/resample.h): anti-aliased on the way down,
 * band-limited on the way up, the samples themselves where rate and grid agree. Slow ones (10
 * samples a second and fewer) that are not thinned out are drawn straight between samples. Step
 * traces give the value that stands, for as long as `age_ns` allows. NaN: not valid, never made up.
 */
#ifndef WINDOW_CUT_H
#define WINDOW_CUT_H

#include <stdint.h>

#include "base/err.h"
#include "trace/trace.h"

struct cutter;

/* For windows at rate_hz; holds resamplers and buffers between calls. One thread. */
MUST_CHECK int cutter_new(double rate_hz, int64_t age_ns, struct cutter **out, struct err *err);
void cutter_free(struct cutter *cutter);

/* out[k], shape (count), is the trace at start_ns + k / rate. */
MUST_CHECK int cutter_cut(struct cutter *cutter, const struct trace *trace, int64_t start_ns,
                          int64_t count, float *out, struct err *err);

#endif
