/*
 * heart.c - beats, ECG, arterial pressure and pulse.
 *
 * Beats: the scenario's mean rate, modulated by breathing and by a slow wave around 0.1 Hz, both
 * weaker the deeper the sleep. ECG: the dynamical model of McSharry, Clifford, Tarassenko & Smith
 * (2003), IEEE Trans Biomed Eng 50:289, angles, weights and widths of its table I (from memory),
 * on the limit cycle and with the weights scaled to millivolts. Pressure: a two-element Windkessel
 * (Frank 1899) filled by each beat, with the notch of valve closure and the wave after it.
 */
#include <math.h>

#include "base/array.h"
#include "random.h"
#include "signals.h"

enum { WAVES = 5, SLOW_WAVES = 9 };

struct wave {
    double angle, weight, width;
    double v5; /* weight in V5, as a multiple */
};

static const struct wave pqrst[WAVES] = {
    {-M_PI / 3, 1.2, 0.25, 0.7}, {-M_PI / 12, -5.0, 0.1, 0.6}, {0, 30.0, 0.1, 1.35},
    {M_PI / 12, -7.5, 0.1, 0.8}, {M_PI / 2, 0.75, 0.4, 1.2},
};
static const double millivolts = 3.6; /* makes the R wave of lead II about 1.1 mV */

static int draw_beats(struct signals *signals, struct err *err)
{
    const struct scenario *scenario = &signals->scenario;
    struct random random;
    double phase[SLOW_WAVES];
    size_t at = 0;
    random_seed(&random, signals->seed, STREAM_HEART);
    for (int k = 0; k < SLOW_WAVES; k++)
        phase[k] = random_uniform(&random, 0, 2 * M_PI);
    for (double t = 0.4; t < scenario->length_s;) {
        int failed = array_reserve((void **)&signals->beats_s, &signals->beat_room,
                                   signals->beat_count + 1, sizeof *signals->beats_s, err);
        if (!failed)
            failed = truth_add(signals, t, "beat", scenario_rate_bpm(scenario, t), err);
        if (failed)
            return failed;
        signals->beats_s[signals->beat_count++] = t;
        double tone = 1.0 - 0.75 * scenario_depth(scenario, t), slow = 0;
        for (int k = 0; k < SLOW_WAVES; k++)
            slow += sin(2 * M_PI * (0.08 + 0.005 * k) * t + phase[k]) / 3.0;
        double breath = breath_phase(signals, t, &at);
        double sinus = breath < 0 ? 0 : -sin(2 * M_PI * breath);
        t += 60.0 / scenario_rate_bpm(scenario, t) *
             (1.0 + 0.025 * tone * slow + 0.045 * tone * sinus + 0.004 * random_normal(&random));
    }
    return ERR_OK;
}

/* The beat that t_s is in, by a cursor that only moves forward; its length in *rr_s. */
static double since_beat(const struct signals *signals, double t_s, size_t *cursor, double *rr_s)
{
    const double *beats = signals->beats_s;
    while (*cursor + 1 < signals->beat_count && beats[*cursor + 1] <= t_s)
        ++*cursor;
    *rr_s = *cursor + 1 < signals->beat_count ? beats[*cursor + 1] - beats[*cursor] : 0.8;
    return t_s - beats[*cursor];
}

/* Slope of z of the model for both leads at one angle, without the return to the baseline. */
static void slopes(double angle, double omega, double stretch, double out[2])
{
    out[0] = out[1] = 0;
    for (int i = 0; i < WAVES; i++) {
        double away = remainder(angle - pqrst[i].angle, 2 * M_PI);
        double width = pqrst[i].width * (i == 0 || i == WAVES - 1 ? sqrt(stretch) : stretch);
        double slope = -pqrst[i].weight * omega * away * exp(-away * away / (2 * width * width));
        out[0] += slope / (stretch * stretch);
        out[1] += slope * pqrst[i].v5 / (stretch * stretch);
    }
}

static void disturb_ecg(const struct signals *signals, size_t i, struct random *random)
{
    const struct scenario *scenario = &signals->scenario;
    double t = (double)i / ECG_HZ;
    double common = 0.012 * sin(2 * M_PI * 50.0 * t);
    signals->ecg_ii[i] += (float)(common + 0.008 * random_normal(random));
    signals->ecg_v5[i] += (float)(common + 0.008 * random_normal(random));
    if (scenario_during(scenario, "cautery", t)) {
        double burst = 1.4 * random_normal(random);
        signals->ecg_ii[i] += (float)burst;
        signals->ecg_v5[i] += (float)(0.8 * burst + 0.3 * random_normal(random));
    }
    if (t >= scenario->lead_off_s && t < scenario->lead_on_s)
        signals->ecg_v5[i] = (float)(4.6 + 0.2 * sin(2 * M_PI * 50.0 * t));
}

static int make_ecg(struct signals *signals, struct err *err)
{
    size_t count, beat = 0, breath = 0;
    struct random random;
    random_seed(&random, signals->seed, STREAM_ECG);
    int failed = samples_new(signals, ECG_HZ, &signals->ecg_ii, &count, err);
    if (!failed)
        failed = samples_new(signals, ECG_HZ, &signals->ecg_v5, &count, err);
    double z[2] = {0, 0}, step = 1.0 / ECG_HZ;
    for (size_t i = 0; i < count && !failed; i++) {
        double t = (double)i / ECG_HZ, rr, slope[2];
        double since = since_beat(signals, t - step / 2, &beat, &rr);
        double phase = breath_phase(signals, t, &breath);
        double baseline = phase < 0 ? 0 : 0.05 * sin(2 * M_PI * phase);
        /* Widths grow with the square root of the rate, as the paper has it, so that the complex
         * keeps its duration when the circle is run through faster. */
        slopes(2 * M_PI * since / rr, 2 * M_PI / rr, sqrt(1.0 / rr), slope);
        for (int lead = 0; lead < 2; lead++)
            z[lead] += step * (millivolts * slope[lead] - (z[lead] - baseline));
        signals->ecg_ii[i] = (float)z[0];
        signals->ecg_v5[i] = (float)z[1];
        disturb_ecg(signals, i, &random);
    }
    return failed;
}

static double bump(double u, double middle, double width)
{
    double away = (u - middle) / width;
    return exp(-away * away);
}

/* The line's own answer to a flush: the bag's pressure, then ringing at its natural frequency. */
static double flushed(const struct scenario *scenario, double t_s, double pressure)
{
    if (t_s < scenario->flush_s)
        return pressure;
    if (t_s < scenario->flush_end_s)
        return 292;
    double after = t_s - scenario->flush_end_s;
    return pressure + 120 * exp(-after / 0.06) * cos(2 * M_PI * 16 * after);
}

static double beat_shape(double u, double pulse, double ejection_s)
{
    double closing = ejection_s + 0.02;
    return pulse * (0.12 * bump(u, closing + 0.075, 0.045) - 0.14 * bump(u, closing, 0.022));
}

static int make_pressure(struct signals *signals, struct err *err)
{
    const struct scenario *scenario = &signals->scenario;
    const double transit_s = 0.19, runoff_s = 1.5, step = 1.0 / PRESSURE_HZ;
    size_t count, beat = 0, breath = 0;
    double filled = scenario_pressure_mmhg(scenario, 0);
    int failed = samples_new(signals, PRESSURE_HZ, &signals->abp, &count, err);
    for (size_t i = 0; i < count && !failed; i++) {
        double t = (double)i / PRESSURE_HZ, rr;
        double u = since_beat(signals, t - transit_s, &beat, &rr);
        double ejection = 0.16 + 0.14 * rr, phase = breath_phase(signals, t, &breath);
        double swing = phase < 0 ? 0 : sin(2 * M_PI * phase);
        double pulse = (68 - 12 * scenario_depth(scenario, t)) * (1 + 0.07 * swing);
        double floor_ = scenario_pressure_mmhg(scenario, t) - pulse * runoff_s / rr;
        double inflow = u > 0 && u < ejection ? pow(sin(M_PI * pow(u / ejection, 0.6)), 2) : 0;
        /* 1.936: the mean of that shape over the ejection is 1 / 1.936. */
        filled += step * (1.936 * pulse / ejection * inflow - (filled - floor_) / runoff_s);
        signals->abp[i] =
            (float)flushed(scenario, t, filled + beat_shape(u, pulse, ejection) + 0.6 * swing);
    }
    return failed;
}

static int make_pleth(struct signals *signals, struct err *err)
{
    const struct scenario *scenario = &signals->scenario;
    const double transit_s = 0.27;
    size_t count, beat = 0, breath = 0;
    int failed = samples_new(signals, PRESSURE_HZ, &signals->pleth, &count, err);
    for (size_t i = 0; i < count && !failed; i++) {
        double t = (double)i / PRESSURE_HZ, rr;
        double u = since_beat(signals, t - transit_s, &beat, &rr);
        double phase = breath_phase(signals, t, &breath);
        /* Vessels of the finger narrow with arousal, and open in sleep. */
        double size =
            (1.6 + 1.6 * scenario_depth(scenario, t)) / (1.0 + 1.2 * scenario_arousal(scenario, t));
        double shape = 0;
        for (int before = 0; before < 2; before++, u += rr) /* the beat before still runs out */
            shape += bump(u, 0.15, 0.085) + 0.42 * bump(u, 0.36, 0.13);
        signals->pleth[i] = (float)(size * shape + (phase < 0 ? 0 : 0.1 * sin(2 * M_PI * phase)));
    }
    return failed;
}

int heart_make(struct signals *signals, struct err *err)
{
    int failed = draw_beats(signals, err);
    if (!failed)
        failed = make_ecg(signals, err);
    if (!failed)
        failed = make_pressure(signals, err);
    if (!failed)
        failed = make_pleth(signals, err);
    return failed;
}
