/*
 * run.c - finding samples by time and times by sample. Pure arithmetic.
 */
#include "recording/run.h"

int64_t run_sample_at(const struct run *run, int64_t at_ns)
{
    if (at_ns <= run->start_ns)
        return run->first;
    if (at_ns >= run_end_ns(run))
        return run->first + run->count;
    /* ceil, then mend: run_time_ns() rounds down, so the sample before may be at at_ns too. */
    int64_t k = mul_div(at_ns - run->start_ns, run->count, run->span_ns);
    while (k > 0 && run_time_ns(run, run->first + k - 1) >= at_ns)
        k--;
    while (k < run->count && run_time_ns(run, run->first + k) < at_ns)
        k++;
    return run->first + k;
}

size_t run_find(const struct run *runs, size_t count, int64_t at_ns)
{
    size_t low = 0, high = count;
    while (low < high) {
        size_t middle = low + (high - low) / 2;
        if (run_end_ns(&runs[middle]) > at_ns)
            high = middle;
        else
            low = middle + 1;
    }
    return low;
}

size_t run_of_sample(const struct run *runs, size_t count, int64_t sample)
{
    size_t low = 0, high = count;
    while (low < high) {
        size_t middle = low + (high - low) / 2;
        if (runs[middle].first + runs[middle].count > sample)
            high = middle;
        else
            low = middle + 1;
    }
    return low < count && sample >= runs[low].first ? low : count;
}

double run_rate_hz(const struct run *run)
{
    return (double)run->count * 1e9 / (double)run->span_ns;
}
