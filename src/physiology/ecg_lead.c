/*
 * ecg_lead.c - filtering a lead to the band of the QRS and sampling its slopes on the common grid.
 * Decides nothing about beats.
 *
 * The chain is that of Pan & Tompkins 1985 with these departures, made so that one detector serves
 * any rate from 100 Hz up: the band (7 to 25 Hz; theirs is 5 to 11) is cut by Butterworth filters
 * at the lead's own rate, and the grid of 200 Hz, which is their rate, is read off the filtered
 * signal; the slope is made absolute, not squared, so that ectopic beats and normal ones stay
 * comparable; the moving mean spans 120 ms instead of 150.
 */
#include "physiology/ecg_lead.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "dsp/stats.h"

#define LOW_HZ    7.0
#define HIGH_HZ   25.0
#define BRIDGE_NS (20 * NS_PER_MS) /* a QRS does not fit into this */

enum { DERIVATIVE = 4 }; /* ticks before the newest that the 5-point derivative needs */

static int design(struct ecg_lead *lead, struct err *err)
{
    double rate_hz = lead->trace->rate_hz;
    int failed = filter_add_highpass(&lead->filter, 2, LOW_HZ, rate_hz, err);
    if (!failed)
        failed = filter_add_lowpass(&lead->filter, 2, HIGH_HZ, rate_hz, err);
    return failed;
}

static int allocate(struct ecg_lead *lead, struct err *err)
{
    void *held = NULL, *band = NULL, *slope = NULL, *feature = NULL;
    int failed = array_new(&held, (size_t)lead->block + 1, sizeof(float), err);
    if (!failed)
        failed = array_new(&band, DERIVATIVE + ECG_BIN, sizeof(float), err);
    if (!failed)
        failed = array_new(&slope, ECG_SPAN, sizeof(float), err);
    if (!failed)
        failed = array_new(&feature, ECG_SPAN, sizeof(float), err);
    lead->held = held;
    lead->band = band;
    lead->slope = slope;
    lead->feature = feature;
    return failed;
}

static void fill_nan(float *values, size_t count)
{
    for (size_t i = 0; i < count; i++)
        values[i] = NAN;
}

/* Forgets the signal so far. */
static void restart(struct ecg_lead *lead)
{
    filter_restart(&lead->filter);
    lead->missing = lead->bridge;
}

int ecg_lead_init(struct ecg_lead *lead, const struct trace *trace, int64_t origin_ns,
                  int64_t block, struct err *err)
{
    *lead = (struct ecg_lead){.trace = trace, .origin_ns = origin_ns, .block = block};
    if (block < 1 || block > ECG_BLOCK_MAX)
        return err_set(err, ERR_USAGE, "a block has 1..%d samples", ECG_BLOCK_MAX);
    int failed = design(lead, err);
    if (!failed)
        failed = allocate(lead, err);
    if (failed) {
        ecg_lead_fini(lead);
        return failed;
    }
    lead->bridge = (int64_t)(trace->rate_hz * (double)BRIDGE_NS / 1e9);
    restart(lead);
    fill_nan(lead->band, DERIVATIVE + ECG_BIN);
    fill_nan(lead->slope, ECG_SPAN);
    fill_nan(lead->feature, ECG_SPAN);
    fill_nan(lead->height, 2 * ECG_AHEAD + 1);
    fill_nan(lead->floor, 2 * ECG_AHEAD + 1);
    return ERR_OK;
}

void ecg_lead_fini(struct ecg_lead *lead)
{
    free(lead->held);
    free(lead->band);
    free(lead->slope);
    free(lead->feature);
    lead->held = lead->band = lead->slope = lead->feature = NULL;
}

/* A few missing samples in a row are bridged by the last value, which makes no slope. */
static void bridge(struct ecg_lead *lead, float *values, int64_t count)
{
    for (int64_t i = 0; i < count; i++) {
        if (!isnan(values[i])) {
            lead->missing = 0;
            lead->last_input = values[i];
        } else if (lead->missing < lead->bridge) {
            lead->missing++;
            values[i] = lead->last_input;
        }
        if (isnan(values[i]))
            lead->missing = lead->bridge; /* too long: nothing to bridge from until one is there */
    }
}

/* Brings sample `want` of the run at hand, which lies past what is held, under the held ones. */
static int hold(struct ecg_lead *lead, int64_t want, struct err *err)
{
    const struct run *run = &lead->trace->runs[lead->run];
    while (want >= lead->held_first + lead->held_count) {
        int64_t first = lead->held_first + lead->held_count;
        int64_t left = run->first + run->count - first;
        int64_t count = left < lead->block ? left : lead->block;
        int64_t keep = lead->held_count > 0 ? 1 : 0;
        if (keep)
            lead->held[0] = lead->held[lead->held_count - 1];
        int failed = trace_read(lead->trace, first, count, lead->held + keep, err);
        if (failed)
            return failed;
        bridge(lead, lead->held + keep, count);
        filter_run(&lead->filter, lead->held + keep, lead->held + keep, (size_t)count);
        lead->held_first = first - keep;
        lead->held_count = count + keep;
    }
    return ERR_OK;
}

/* Goes over to `run`. A pause too short to hide a QRS is passed over: the filter goes on, having
 * seen the run before to its end. */
static int change_run(struct ecg_lead *lead, size_t run, struct err *err)
{
    const struct run *runs = lead->trace->runs;
    bool follows = lead->held_count > 0 && run == lead->run + 1;
    int failed = ERR_OK;
    if (follows && runs[run].start_ns - run_end_ns(&runs[run - 1]) <= BRIDGE_NS)
        failed = hold(lead, runs[run].first - 1, err);
    else
        restart(lead);
    lead->run = run;
    lead->held_first = runs[run].first;
    lead->held_count = 0;
    return failed;
}

/* Makes the run that holds at_ns the one at hand; *inside is false in a gap and past the end. */
static int enter_run(struct ecg_lead *lead, int64_t at_ns, bool *inside, struct err *err)
{
    const struct trace *trace = lead->trace;
    size_t run = lead->run;
    while (run < trace->run_count && run_end_ns(&trace->runs[run]) <= at_ns)
        run++;
    *inside = run < trace->run_count && trace->runs[run].start_ns <= at_ns;
    bool new = *inside && (run != lead->run || lead->held_count == 0);
    return new ? change_run(lead, run, err) : ERR_OK;
}

/* The filtered signal at a tick, on the straight line between two samples. */
static int band_at(struct ecg_lead *lead, int64_t tick, float *out, struct err *err)
{
    int64_t at_ns = lead->origin_ns + tick * ECG_TICK_NS;
    bool inside;
    *out = NAN;
    int failed = enter_run(lead, at_ns, &inside, err);
    if (failed || !inside)
        return failed;
    const struct run *run = &lead->trace->runs[lead->run];
    double at = (double)(at_ns - run->start_ns) * ((double)run->count / (double)run->span_ns);
    int64_t before = (int64_t)at;
    float part = (float)(at - (double)before);
    before = run->first + (before < run->count ? before : run->count - 1);
    int64_t after = before + 1 < run->first + run->count ? before + 1 : before;
    failed = hold(lead, after, err);
    if (failed)
        return failed;
    float low = lead->held[before - lead->held_first], high = lead->held[after - lead->held_first];
    *out = low + part * (high - low);
    return ERR_OK;
}

/* |slope| and its moving mean for the newest bin, from the band signal at its ticks. */
static void measure_slopes(struct ecg_lead *lead)
{
    float *slope = lead->slope + ECG_SPAN - ECG_BIN;
    float *feature = lead->feature + ECG_SPAN - ECG_BIN;
    for (int i = 0; i < ECG_BIN; i++) {
        const float *x = lead->band + DERIVATIVE + i;
        slope[i] = fabsf(2 * x[0] + x[-1] - x[-3] - 2 * x[-4]) / 8;
    }
    for (int i = 0; i < ECG_BIN; i++) {
        float sum = 0;
        for (int k = 0; k < ECG_WINDOW; k++)
            sum += slope[i - k];
        feature[i] = sum / ECG_WINDOW;
    }
}

static void measure_bin(struct ecg_lead *lead)
{
    const float *feature = lead->feature + ECG_SPAN - ECG_BIN;
    double values[ECG_BIN], height = 0;
    size_t count = 0;
    for (int i = 0; i < ECG_BIN; i++) {
        if (!isnan(feature[i])) {
            values[count++] = (double)feature[i];
            height = fmax(height, (double)feature[i]);
        }
    }
    bool enough = count >= ECG_BIN / 2;
    lead->height[2 * ECG_AHEAD] = enough ? (float)height : NAN;
    lead->floor[2 * ECG_AHEAD] = enough ? (float)median(values, count) : NAN;
}

int ecg_lead_advance(struct ecg_lead *lead, struct err *err)
{
    const size_t kept = (ECG_SPAN - ECG_BIN) * sizeof(float);
    const size_t kept_bins = 2 * ECG_AHEAD * sizeof(float);
    memmove(lead->slope, lead->slope + ECG_BIN, kept);
    memmove(lead->feature, lead->feature + ECG_BIN, kept);
    memmove(lead->height, lead->height + 1, kept_bins);
    memmove(lead->floor, lead->floor + 1, kept_bins);
    memcpy(lead->band, lead->band + ECG_BIN, DERIVATIVE * sizeof(float));
    for (int i = 0; i < ECG_BIN; i++) {
        int failed = band_at(lead, lead->next_tick++, &lead->band[DERIVATIVE + i], err);
        if (failed)
            return failed;
        lead->empty_ticks = isnan(lead->band[DERIVATIVE + i]) ? lead->empty_ticks + 1 : 0;
    }
    measure_slopes(lead);
    measure_bin(lead);
    return ERR_OK;
}

int64_t ecg_lead_idle_bins(const struct ecg_lead *lead)
{
    const struct trace *trace = lead->trace;
    if (lead->empty_ticks < ECG_SPAN + (2 * ECG_AHEAD + 1) * ECG_BIN)
        return 0;
    int64_t at_ns = lead->origin_ns + lead->next_tick * ECG_TICK_NS;
    size_t run = run_find(trace->runs, trace->run_count, at_ns);
    if (run == trace->run_count)
        return INT64_MAX;
    int64_t pause_ns = trace->runs[run].start_ns - at_ns;
    return pause_ns > 0 ? pause_ns / (ECG_BIN * ECG_TICK_NS) : 0;
}

void ecg_lead_skip(struct ecg_lead *lead, int64_t bins)
{
    lead->next_tick += bins * ECG_BIN;
}

static double median_of_bins(const float *bins)
{
    double values[2 * ECG_AHEAD + 1];
    size_t count = 0;
    for (int i = 0; i < 2 * ECG_AHEAD + 1; i++) {
        if (!isnan(bins[i]))
            values[count++] = (double)bins[i];
    }
    return median(values, count);
}

void ecg_lead_levels(const struct ecg_lead *lead, double *height, double *floor)
{
    *height = median_of_bins(lead->height);
    *floor = median_of_bins(lead->floor);
}
