/*
 * biquad.h - small recursive filters: Butterworth high-pass and low-pass, mains notch.
 *
 * Second-order sections by the bilinear transform, in a row. Two ways to run them:
 *   causal     filter_run(), block after block; the state carries over, so that cutting a signal
 *              into blocks changes nothing.
 *   zero phase filter_both_ways(), forward and then backward over one buffer: twice the
 *              attenuation (-6 dB at the cut-off) and no delay.
 *
 * A missing sample (NaN) gives NaN, and the filter starts afresh at the next sample that is there.
 * It starts primed: as if the first value had been there for ever, so that an offset makes no
 * ringing. After a start the output still needs about rate / cut-off samples to settle.
 *
 * Memory: a struct filter is plain data, on the caller's stack; nothing is allocated. Threads: one
 * thread a filter.
 */
#ifndef DSP_BIQUAD_H
#define DSP_BIQUAD_H

#include <stdbool.h>
#include <stddef.h>

#include "base/err.h"

enum { FILTER_SECTIONS = 4 };

/* y = b0 x + b1 x' + b2 x'' - a1 y' - a2 y'' with a0 = 1. */
struct biquad {
    double b0, b1, b2, a1, a2;
    double s1, s2; /* state, transposed direct form II */
};

/* Zeroed = passes the signal through; each design call below adds its sections at the end. */
struct filter {
    struct biquad section[FILTER_SECTIONS];
    size_t sections;
    bool running; /* false: the next sample primes the state */
};

/* Butterworth of order 2 or 4, -3 dB at cutoff_hz. ERR_USAGE when the cut-off is not between 0 and
 * half the rate, or the filter is full. */
MUST_CHECK int filter_add_lowpass(struct filter *filter, int order, double cutoff_hz,
                                  double rate_hz, struct err *err);
MUST_CHECK int filter_add_highpass(struct filter *filter, int order, double cutoff_hz,
                                   double rate_hz, struct err *err);

/* Zero at centre_hz, -3 dB band centre_hz / q wide. */
MUST_CHECK int filter_add_notch(struct filter *filter, double centre_hz, double q, double rate_hz,
                                struct err *err);

/* Forgets the signal so far: the next sample primes the state. */
void filter_restart(struct filter *filter);

/* in and out, shape (count); they may be the same buffer. */
void filter_run(struct filter *filter, const float *in, float *out, size_t count);

/* In place over signal, shape (count), each stretch between missing samples by itself; the state
 * before and after the call is that of filter_restart(). The ends of a stretch are primed with its
 * first and last value, so leave about rate / cut-off samples of margin where that matters. */
void filter_both_ways(struct filter *filter, float *signal, size_t count);

#endif
