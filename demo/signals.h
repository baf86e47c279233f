/*
 * signals.h - what the simulated body gives off, sample by sample, and the truth behind it.
 *
 * Every signal covers theatre time [0, length_s) at its own rate. Errors follow base/err.h; the
 * arrays are freed by signals_free().
 */
#ifndef DEMO_SIGNALS_H
#define DEMO_SIGNALS_H

#include <stdint.h>

#include "base/err.h"
#include "scenario.h"

enum { ECG_HZ = 500, PRESSURE_HZ = 125, RESP_HZ = 50, CO2_HZ = 25, EDA_HZ = 32, EEG_HZ = 250 };

struct truth {
    double time_s;
    const char *event;
    double value;
};

struct signals {
    uint64_t seed;
    struct scenario scenario;
    float *ecg_ii, *ecg_v5;      /* mV, ECG_HZ */
    float *abp, *pleth;          /* mm[Hg], %, PRESSURE_HZ */
    float *resp, *co2;           /* Ohm, RESP_HZ; mm[Hg], CO2_HZ */
    float *eda;                  /* uS, EDA_HZ */
    float *eeg_left, *eeg_right; /* uV, EEG_HZ */
    double *beats_s;             /* R peaks, shape (beat_count) */
    size_t beat_count, beat_room;
    double *breaths_s; /* beginnings of inspiration, shape (breath_count) */
    size_t breath_count, breath_room;
    struct truth *truth; /* shape (truth_count), in any order */
    size_t truth_count, truth_room;
};

/* In this order: each may use what the ones before left. */
MUST_CHECK int breath_make(struct signals *signals, struct err *err);
MUST_CHECK int heart_make(struct signals *signals, struct err *err);
MUST_CHECK int skin_make(struct signals *signals, struct err *err);
MUST_CHECK int brain_make(struct signals *signals, struct err *err);

MUST_CHECK int signals_make(struct signals *signals, double length_s, uint64_t seed,
                            struct err *err);
void signals_free(struct signals *signals);

MUST_CHECK int truth_add(struct signals *signals, double time_s, const char *event, double value,
                         struct err *err);
/* An array for length_s at rate_hz. */
MUST_CHECK int samples_new(const struct signals *signals, int rate_hz, float **out, size_t *count,
                           struct err *err);
/* Phase of the breath at t_s: 0 at its beginning, 1 at the next one's; -1 while none is drawn.
 * *cursor speeds up rising calls; begin with 0. */
double breath_phase(const struct signals *signals, double t_s, size_t *cursor);

enum random_stream {
    STREAM_BREATH = 1,
    STREAM_HEART,
    STREAM_ECG,
    STREAM_SKIN,
    STREAM_BRAIN,
    STREAM_RATER
};

#endif
