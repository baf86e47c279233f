/*
 * brain.c - two frontal EEG channels: noises of four bands whose weights follow depth (slow and
 * alpha waves asleep, fast ones awake), a stretch of burst suppression, blinks, cautery.
 */
#include <math.h>

#include "random.h"
#include "signals.h"

enum { BANDS = 4, SOURCES = 3 }; /* a shared source, and one a side */

struct band {
    double hz, width_hz;
    double awake_uv, asleep_uv;
};

static const struct band bands[BANDS] = {
    {1.2, 0.8, 7, 26}, {5.5, 2, 5, 9}, {10, 1.6, 7, 15}, {21, 7, 6, 2.2}};

/* A resonator driven by white noise: second-order autoregression, unit variance at its output. */
struct resonator {
    double a1, a2, gain, y1, y2;
};

static void resonator_init(struct resonator *r, const struct band *band)
{
    double radius = exp(-M_PI * band->width_hz / EEG_HZ);
    double c = 2 * radius * cos(2 * M_PI * band->hz / EEG_HZ), q = radius * radius;
    /* Variance of y = c y1 - q y2 + e (Box & Jenkins). */
    double variance = (1 + q) / ((1 - q) * ((1 + q) * (1 + q) - c * c));
    *r = (struct resonator){.a1 = c, .a2 = -q, .gain = 1 / sqrt(variance)};
}

static double resonator_next(struct resonator *r, struct random *random)
{
    double y = r->a1 * r->y1 + r->a2 * r->y2 + r->gain * random_normal(random);
    r->y2 = r->y1;
    r->y1 = y;
    return y;
}

struct suppression {
    double until_s;
    bool silent;
    double level; /* 1 = all of it passes */
};

/* Turns bursts on and off between suppressed_s and awakened_s. */
static int suppress(struct signals *signals, struct suppression *now, double t_s,
                    struct random *random, struct err *err)
{
    const struct scenario *scenario = &signals->scenario;
    bool within = t_s >= scenario->suppressed_s && t_s < scenario->awakened_s;
    int failed = ERR_OK;
    if (within && t_s >= now->until_s) {
        now->silent = !now->silent;
        double span = now->silent ? random_uniform(random, 3, 7) : random_uniform(random, 1, 2.5);
        now->until_s = fmin(t_s + span, scenario->awakened_s);
        if (now->silent)
            failed = truth_add(signals, t_s, "suppression", now->until_s - t_s, err);
    }
    double target = !within ? 1.0 : now->silent ? 0.04 : 1.3;
    now->level += (target - now->level) * 0.08;
    return failed;
}

static double blink(double t_s, double *next_s, double depth, struct random *random)
{
    if (t_s > *next_s + 0.4)
        *next_s = t_s + random_uniform(random, 2, 9);
    double away = (t_s - *next_s - 0.2) / 0.09;
    return depth < 0.1 ? 140 * exp(-away * away) : 0;
}

int brain_make(struct signals *signals, struct err *err)
{
    const struct scenario *scenario = &signals->scenario;
    struct resonator source[SOURCES][BANDS];
    struct suppression suppression = {.level = 1};
    struct random random;
    size_t count;
    double next_blink = 3;
    random_seed(&random, signals->seed, STREAM_BRAIN);
    for (int s = 0; s < SOURCES; s++)
        for (int b = 0; b < BANDS; b++)
            resonator_init(&source[s][b], &bands[b]);
    int failed = samples_new(signals, EEG_HZ, &signals->eeg_left, &count, err);
    if (!failed)
        failed = samples_new(signals, EEG_HZ, &signals->eeg_right, &count, err);
    for (size_t i = 0; i < count && !failed; i++) {
        double t = (double)i / EEG_HZ, depth = scenario_depth(scenario, t), sum[SOURCES] = {0};
        for (int b = 0; b < BANDS; b++) {
            double size = bands[b].awake_uv + depth * (bands[b].asleep_uv - bands[b].awake_uv);
            for (int s = 0; s < SOURCES; s++)
                sum[s] += size * resonator_next(&source[s][b], &random);
        }
        failed = suppress(signals, &suppression, t, &random, err);
        double lid = blink(t, &next_blink, depth, &random);
        double burst = scenario_during(scenario, "cautery", t) ? 120 * random_normal(&random) : 0;
        signals->eeg_left[i] = (float)(suppression.level * (0.8 * sum[0] + 0.6 * sum[1]) + lid +
                                       burst + 0.5 * random_normal(&random));
        signals->eeg_right[i] = (float)(suppression.level * (0.8 * sum[0] + 0.6 * sum[2]) +
                                        0.9 * lid + 0.7 * burst + 0.5 * random_normal(&random));
    }
    return failed;
}
