/*
 * features.c - arithmetic on one window. Knows no trace and no mark.
 */
#include "window/features.h"

#include <math.h>

#include "base/ns.h"
#include "dsp/stats.h"

/* The valid samples of the baseline range [from, to), into scratch; their number. */
static size_t baseline_samples(const struct recipe *recipe, const float *values, double *scratch)
{
    double from = s_from_ns(recipe->baseline_from_ns), to = s_from_ns(recipe->baseline_to_ns);
    size_t count = 0;
    for (int64_t k = 0; k < recipe->samples; k++) {
        double t = recipe_time_s(recipe, k);
        if (t >= from - 1e-9 && t < to - 1e-9 && !isnan(values[k]))
            scratch[count++] = (double)values[k];
    }
    return count;
}

static double mean_of(const double *values, size_t count)
{
    double sum = 0;
    for (size_t i = 0; i < count; i++)
        sum += values[i];
    return count > 0 ? sum / (double)count : (double)NAN;
}

/* Standard deviation with denominator n - 1; NaN for fewer than two. */
static double deviation_of(const double *values, size_t count)
{
    double mean = mean_of(values, count), sum = 0;
    for (size_t i = 0; i < count; i++)
        sum += (values[i] - mean) * (values[i] - mean);
    return count > 1 ? sqrt(sum / (double)(count - 1)) : (double)NAN;
}

static void correct(const struct recipe *recipe, float *values, double baseline, double deviation)
{
    double shift = baseline, scale = 1;
    if (recipe->baseline_mode == BASELINE_NONE)
        return;
    if (recipe->baseline_mode == BASELINE_PERCENT)
        scale = baseline != 0 ? 100 / baseline : (double)NAN;
    if (recipe->baseline_mode == BASELINE_Z)
        scale = deviation > 0 ? 1 / deviation : (double)NAN;
    for (int64_t k = 0; k < recipe->samples; k++)
        values[k] = (float)(((double)values[k] - shift) * scale);
}

static void sum_up(const struct recipe *recipe, const float *values, struct features *out)
{
    double sum = 0, area = 0;
    int64_t valid = 0, after = 0;
    for (int64_t k = 0; k < recipe->samples; k++) {
        double t = recipe_time_s(recipe, k), value = (double)values[k];
        if (isnan(value))
            continue;
        valid++;
        if (t < -1e-9)
            continue;
        sum += value;
        if (after == 0 || value > out->peak) {
            out->peak = value;
            out->peak_s = t;
        }
        if (after == 0 || value < out->trough) {
            out->trough = value;
            out->trough_s = t;
        }
        if (k > 0 && !isnan(values[k - 1]) && t - 1 / recipe->rate_hz >= -1e-9)
            area += (value + (double)values[k - 1]) / 2 / recipe->rate_hz;
        after++;
    }
    out->valid_share = (double)valid / (double)recipe->samples;
    if (after > 0) {
        out->mean = sum / (double)after;
        out->area = area;
    }
}

void window_features(const struct recipe *recipe, float *values, double *scratch,
                     struct features *out)
{
    const double none = (double)NAN;
    *out = (struct features){0, none, none, none, none, none, none, none};
    if (recipe->has_baseline) {
        size_t count = baseline_samples(recipe, values, scratch);
        double deviation = deviation_of(scratch, count);
        out->baseline = recipe->baseline_statistic == BASELINE_MEDIAN ? median(scratch, count)
                                                                      : mean_of(scratch, count);
        correct(recipe, values, out->baseline, deviation);
    }
    sum_up(recipe, values, out);
}
