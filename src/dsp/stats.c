/*
 * stats.c - order statistics by quickselect (Hoare 1961). Sorts nothing whole, takes no memory.
 */
#include "dsp/stats.h"

#include <math.h>

static void swap(double *a, double *b)
{
    double kept = *a;
    *a = *b;
    *b = kept;
}

/* The median of three: input that is sorted already, the common case, stays linear. */
static double pivot_of(const double *values, size_t low, size_t high)
{
    double a = values[low], b = values[low + (high - low) / 2], c = values[high];
    return fmax(fmin(a, b), fmin(fmax(a, b), c));
}

double select_kth(double *values, size_t count, size_t k)
{
    size_t low = 0, high = count - 1;
    while (low < high) {
        double pivot = pivot_of(values, low, high);
        size_t i = low, after = high + 1; /* [low, i) <= pivot <= [after, high] */
        while (i < after) {
            while (values[i] < pivot)
                i++;
            while (values[after - 1] > pivot)
                after--;
            if (i < after)
                swap(&values[i++], &values[--after]);
        }
        if (k < after)
            high = after - 1;
        else if (k >= i)
            low = i;
        else
            break;
    }
    return values[k];
}

double median(double *values, size_t count)
{
    if (count == 0)
        return (double)NAN;
    double upper = select_kth(values, count, count / 2);
    if (count % 2 == 1)
        return upper;
    double lower = values[0]; /* the greatest of the lower half */
    for (size_t i = 1; i < count / 2; i++)
        lower = fmax(lower, values[i]);
    return (lower + upper) / 2;
}

double quantile(double *values, size_t count, double share)
{
    if (count == 0)
        return (double)NAN;
    double at = share * (double)(count - 1);
    size_t k = (size_t)at;
    double low = select_kth(values, count, k);
    if (k + 1 == count)
        return low;
    double high = values[k + 1]; /* the least of what lies above */
    for (size_t i = k + 2; i < count; i++)
        high = fmin(high, values[i]);
    return low + (at - (double)k) * (high - low);
}

void widen_extremes(const float *values, int64_t count, float *low, float *high)
{
    float least = *low, greatest = *high;
    for (int64_t i = 0; i < count; i++) {
        least = values[i] < least ? values[i] : least;
        greatest = values[i] > greatest ? values[i] : greatest;
    }
    *low = least;
    *high = greatest;
}
