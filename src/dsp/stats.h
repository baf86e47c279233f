/*
 * stats.h - order statistics of small sets of numbers. The caller lends the memory, whose order
 * is changed; nothing is allocated. No NaN may be among the numbers.
 */
#ifndef DSP_STATS_H
#define DSP_STATS_H

#include <stddef.h>
#include <stdint.h>

/* The k-th smallest (from 0) of values, shape (count), k < count. Reorders values so that what
 * comes before index k is not greater and what comes after is not less. */
double select_kth(double *values, size_t count, size_t k);

/* The middle value, or the mean of the two middle ones; NaN when count is 0. Reorders values. */
double median(double *values, size_t count);

/* Quantile by linear interpolation between order statistics at share * (count - 1) (Hyndman &
 * Fan 1996, type 7: the default of R and numpy); share in 0..1; NaN when count is 0. Reorders
 * values. */
double quantile(double *values, size_t count, double share);

/* Widens [*low, *high] to hold values, shape (count), NaN left out. Begin with INFINITY and
 * -INFINITY: low > high afterwards means that there was no number. */
void widen_extremes(const float *values, int64_t count, float *low, float *high);

#endif
