/*
 * resample.h - a signal on another even grid: any ratio of rates, any offset of the grid.
 *
 * Each output is the windowed-sinc (Kaiser) value of the input at an exact fractional position,
 * with the cut-off (-6 dB) at half the lower of the two rates: going up is band-limited
 * interpolation through the samples, going down is anti-aliased. Up to 0.8 of the cut-off the
 * response is flat to 1e-4; from 1.2 of it, 74 dB or more are taken off.
 *
 * Missing samples: an output is NaN when any input within the reach of the kernel is NaN or lies
 * outside the input; nothing is made up. The one exception is an output that falls on an input
 * sample when not going down: the kernel is 1 there and 0 at every other sample, so the sample
 * itself is handed through, next to a gap and at the ends too. Same rate and same grid therefore
 * copy the input.
 *
 * Use, for a window of a longer signal: read resampler_reach_samples() more input samples on both
 * sides of what is wanted, or as many as there are.
 *
 * Memory: resampler_new() allocates the table, resampler_apply() nothing. Threads: after
 * resampler_new() a resampler is read-only and may be shared.
 */
#ifndef DSP_RESAMPLE_H
#define DSP_RESAMPLE_H

#include <stddef.h>
#include <stdint.h>

#include "base/err.h"

#define RESAMPLE_MOST_RATIO 10000.0 /* input rate over output rate */

struct resampler;

/* ERR_USAGE when a rate is not positive or the ratio is out of range. */
MUST_CHECK int resampler_new(double in_rate_hz, double out_rate_hz, struct resampler **out,
                             struct err *err);
void resampler_free(struct resampler *resampler);

/* How many input samples to each side of a position its output depends on. */
int64_t resampler_reach_samples(const struct resampler *resampler);

/* out[k], shape (out_count), is the signal at position first_position + k * step, counted in input
 * samples from input[0], shape (in_count). `step` is usually in_rate / out_rate. Positions may lie
 * outside the input (NaN). */
void resampler_apply(const struct resampler *resampler, const float *input, int64_t in_count,
                     double first_position, double step, float *out, int64_t out_count);

#endif
