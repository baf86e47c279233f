/*
 * ecg_fuse.c - weighting leads and finding the peaks of their sum. Whether a peak is a QRS is
 * decided elsewhere (qrs.c).
 *
 * Own choice: no published rule is followed. On 12 MIT-BIH records, both leads, it gives 38 missed
 * and 59 false beats of 22285; equal weights give 29 and 154, the first lead alone 50 and 73, the
 * second alone 772 and 587.
 */
#include "physiology/ecg_fuse.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"

#define NOISE_CLARITY 2.0  /* of a lead that shows nothing but noise */
#define MOST_CLARITY  20.0 /* more makes no lead better */
#define UNCLEAR       4.5  /* clarity below which a beat is doubtful */
#define CREST         0.2  /* of the logarithm of what stands above a usual QRS */
#define STICK         2.0  /* how much better another lead must be before R peaks move to it */
#define LEAST_WEIGHT  1e-3

int ecg_fuse_init(struct ecg_fuse *fuse, struct ecg_lead *leads, size_t lead_count, struct err *err)
{
    void *weights = NULL, *scales = NULL, *feature = NULL, *slope = NULL;
    int failed = array_new_zero(&weights, lead_count, sizeof(double), err);
    if (!failed)
        failed = array_new_zero(&scales, lead_count, sizeof(double), err);
    if (!failed)
        failed = array_new(&feature, FUSE_SPAN, sizeof(float), err);
    if (!failed)
        failed = array_new(&slope, FUSE_SPAN, sizeof(float), err);
    *fuse = (struct ecg_fuse){.leads = leads,
                              .lead_count = lead_count,
                              .weights = weights,
                              .scales = scales,
                              .bin = -1 - ECG_AHEAD,
                              .feature = feature,
                              .slope = slope};
    if (failed) {
        ecg_fuse_fini(fuse);
        return failed;
    }
    for (size_t i = 0; i < FUSE_SPAN; i++)
        fuse->feature[i] = fuse->slope[i] = NAN;
    return ERR_OK;
}

void ecg_fuse_fini(struct ecg_fuse *fuse)
{
    free(fuse->weights);
    free(fuse->scales);
    free(fuse->feature);
    free(fuse->slope);
    fuse->weights = fuse->scales = NULL;
    fuse->feature = fuse->slope = NULL;
}

static double clarity_of(double height, double floor)
{
    return height > 0 ? fmin(height / fmax(floor, height / MOST_CLARITY), MOST_CLARITY) : 1;
}

/* A lead's weight grows with the square of its clarity above that of noise: of the lesser of what
 * it is around and in this very bin, so that a burst in one lead is left to the others. */
static void weigh_leads(struct ecg_fuse *fuse)
{
    fuse->clarity = fuse->clarity_here = 1;
    for (size_t l = 0; l < fuse->lead_count; l++) {
        const struct ecg_lead *lead = &fuse->leads[l];
        double height, floor;
        ecg_lead_levels(lead, &height, &floor);
        double clarity = clarity_of(height, floor);
        double here = clarity_of((double)lead->height[ECG_AHEAD], (double)lead->floor[ECG_AHEAD]);
        here = isnan(lead->height[ECG_AHEAD]) ? clarity : here; /* mostly missing: unknown */
        double above = fmin(here, clarity) - NOISE_CLARITY;
        fuse->clarity = fmax(fuse->clarity, clarity);
        fuse->clarity_here = fmax(fuse->clarity_here, here);
        fuse->scales[l] = height > 0 ? 1 / height : 0;
        fuse->weights[l] = height > 0 ? fmax(above * fabs(above), LEAST_WEIGHT) : 0;
        if (fuse->weights[l] > STICK * fuse->weights[fuse->best_lead])
            fuse->best_lead = l;
    }
}

static void shift(struct ecg_fuse *fuse)
{
    memmove(fuse->feature, fuse->feature + ECG_BIN, ECG_BIN * sizeof(float));
    memmove(fuse->slope, fuse->slope + ECG_BIN, ECG_BIN * sizeof(float));
}

/* A feature in units of a usual QRS, what stands above one compressed: a burst in one lead does not
 * drown the others. */
static double compressed(double feature)
{
    return feature > 1 ? 1 + CREST * log(feature) : feature;
}

/* The weighted mean over those leads that are there at a tick; NaN when none is. */
static void sum_leads(struct ecg_fuse *fuse)
{
    for (size_t i = 0; i < ECG_BIN; i++) {
        double feature = 0, slope = 0, weight = 0;
        for (size_t l = 0; l < fuse->lead_count; l++) {
            const struct ecg_lead *lead = &fuse->leads[l];
            double f = (double)lead->feature[ECG_BIN + i], s = (double)lead->slope[ECG_BIN + i];
            if (isnan(f))
                continue;
            feature += fuse->weights[l] * compressed(fuse->scales[l] * f);
            slope += fuse->weights[l] * fuse->scales[l] * s;
            weight += fuse->weights[l];
            if (fuse->weights[l] == 0)
                weight += LEAST_WEIGHT;
        }
        fuse->feature[ECG_BIN + i] = weight > 0 ? (float)(feature / weight) : NAN;
        fuse->slope[ECG_BIN + i] = weight > 0 ? (float)(slope / weight) : NAN;
    }
}

/* A maximum that nothing tops within QRS_REFRACTORY ticks on either side; the first of equals. Not
 * on the edge of a stretch, where a QRS may be cut. */
static bool is_peak(const float *x)
{
    if (!(x[-1] < x[0]) || !(x[1] <= x[0]))
        return false;
    for (int k = 2; k <= QRS_REFRACTORY; k++) {
        if (x[-k] >= x[0] || x[k] > x[0])
            return false;
    }
    return true;
}

static double steepest(const float *slope)
{
    float most = 0;
    for (int k = 0; k < ECG_WINDOW; k++)
        most = slope[-k] > most ? slope[-k] : most;
    return (double)most;
}

static void add_event(struct ecg_fuse *fuse, enum fuse_kind kind, int64_t tick, size_t at)
{
    fuse->events[fuse->event_count++] = (struct fuse_event){
        .kind = kind,
        .peak = {.tick = tick,
                 .height = (double)fuse->feature[at],
                 .slope = steepest(fuse->slope + at),
                 .clarity = fuse->clarity,
                 .doubtful = fmin(fuse->clarity, fuse->clarity_here) < UNCLEAR,
                 .lead = fuse->best_lead},
    };
}

/* Peaks and ends of stretches among the ticks that now have their neighbours on both sides. */
static void scan(struct ecg_fuse *fuse)
{
    const size_t from = ECG_BIN - QRS_REFRACTORY, to = FUSE_SPAN - QRS_REFRACTORY;
    fuse->event_count = 0;
    for (size_t at = from; at < to; at++) {
        int64_t tick = fuse->bin * ECG_BIN + (int64_t)at - ECG_BIN;
        bool missing = isnan(fuse->feature[at]);
        if (missing && fuse->inside)
            add_event(fuse, FUSE_STRETCH_END, tick, at);
        fuse->inside = !missing;
        if (!missing && is_peak(fuse->feature + at))
            add_event(fuse, FUSE_PEAK, tick, at);
    }
}

int ecg_fuse_advance(struct ecg_fuse *fuse, struct err *err)
{
    do {
        for (size_t l = 0; l < fuse->lead_count; l++) {
            int failed = ecg_lead_advance(&fuse->leads[l], err);
            if (failed)
                return failed;
        }
        fuse->bin++;
    } while (fuse->bin < 0);
    weigh_leads(fuse);
    shift(fuse);
    sum_leads(fuse);
    scan(fuse);
    return ERR_OK;
}

int64_t ecg_fuse_skip(struct ecg_fuse *fuse, int64_t most)
{
    int64_t bins = most;
    for (size_t l = 0; l < fuse->lead_count; l++) {
        int64_t idle = ecg_lead_idle_bins(&fuse->leads[l]);
        bins = idle < bins ? idle : bins;
    }
    if (bins <= 0)
        return 0;
    for (size_t l = 0; l < fuse->lead_count; l++)
        ecg_lead_skip(&fuse->leads[l], bins);
    fuse->bin += bins;
    return bins;
}
