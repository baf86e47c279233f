/*
 * breath.c - breathing: her own and uneven, then none, then the ventilator's twelve a minute.
 */
#include <math.h>

#include "base/array.h"
#include "random.h"
#include "signals.h"

static const double inspired_share = 0.36, ventilator_s = 5.0;

static bool ventilated(const struct scenario *scenario, double t_s)
{
    return t_s >= scenario->ventilated_s && t_s < scenario->extubation_s - 30;
}

/* Nobody breathes for her during laryngoscopy. */
static bool apnoea(const struct scenario *scenario, double t_s)
{
    return t_s >= scenario->apnoea_s && t_s < scenario->ventilated_s;
}

double breath_phase(const struct signals *signals, double t_s, size_t *cursor)
{
    while (*cursor + 1 < signals->breath_count && signals->breaths_s[*cursor + 1] <= t_s)
        ++*cursor;
    if (signals->breath_count == 0 || signals->breaths_s[*cursor] > t_s)
        return -1;
    double began = signals->breaths_s[*cursor];
    double ends = *cursor + 1 < signals->breath_count ? signals->breaths_s[*cursor + 1] : began + 5;
    ends = fmin(ends, began + 7); /* what follows an apnoea does not stretch the breath before */
    return t_s < ends ? (t_s - began) / (ends - began) : -1;
}

static int draw_breaths(struct signals *signals, struct random *random, struct err *err)
{
    const struct scenario *scenario = &signals->scenario;
    for (double t = 1.0; t < scenario->length_s;) {
        if (apnoea(scenario, t)) {
            t = scenario->ventilated_s;
            continue;
        }
        int failed = array_reserve((void **)&signals->breaths_s, &signals->breath_room,
                                   signals->breath_count + 1, sizeof *signals->breaths_s, err);
        if (!failed)
            failed = truth_add(signals, t, "breath", 0, err);
        if (failed)
            return failed;
        signals->breaths_s[signals->breath_count++] = t;
        double own = 60.0 / 14.5 * (1.0 + 0.12 * random_normal(random));
        t += ventilated(scenario, t) ? ventilator_s : fmax(2.0, own);
    }
    return ERR_OK;
}

/* Chest volume over a breath: in as half a cosine, out as a decay; 0 .. 1. */
static double volume(double phase)
{
    if (phase < 0)
        return 0;
    if (phase < inspired_share)
        return 0.5 - 0.5 * cos(M_PI * phase / inspired_share);
    double tail = exp(-(1.0 - inspired_share) * 6.0);
    return (exp(-(phase - inspired_share) * 6.0) - tail) / (1.0 - tail);
}

/* Carbon dioxide at the mouth: none while breathing in, then up to a slowly rising plateau. */
static double carbon_dioxide(double phase, double plateau)
{
    if (phase < inspired_share + 0.04)
        return phase >= 0 && phase < 0.05 ? plateau * (1.0 - phase / 0.05) : 0;
    double u = phase - inspired_share - 0.04;
    return plateau * (1.0 - exp(-u / 0.03)) * (0.94 + 0.1 * u);
}

int breath_make(struct signals *signals, struct err *err)
{
    const struct scenario *scenario = &signals->scenario;
    struct random random;
    size_t count, at = 0;
    random_seed(&random, signals->seed, STREAM_BREATH);
    int failed = draw_breaths(signals, &random, err);
    if (!failed)
        failed = samples_new(signals, RESP_HZ, &signals->resp, &count, err);
    if (failed)
        return failed;
    for (size_t i = 0; i < count; i++) {
        double t = (double)i / RESP_HZ, size = ventilated(scenario, t) ? 1.4 : 1.0;
        signals->resp[i] =
            (float)(size * volume(breath_phase(signals, t, &at)) +
                    0.03 * sin(2 * M_PI * 0.013 * t) + 0.01 * random_normal(&random));
    }
    failed = samples_new(signals, CO2_HZ, &signals->co2, &count, err);
    at = 0;
    for (size_t i = 0; i < count && !failed; i++) {
        double t = (double)i / CO2_HZ, plateau = 36;
        const struct happening *gas = scenario_find(scenario, "gas");
        if (t > gas->at_s) /* carbon dioxide of the gas in the abdomen is taken up */
            plateau += 7.0 * (1.0 - exp(-(t - gas->at_s) / 300.0));
        double value = carbon_dioxide(breath_phase(signals, t, &at), plateau);
        signals->co2[i] = (float)fmax(0, value + 0.15 * random_normal(&random));
    }
    return failed;
}
