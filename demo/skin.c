/*
 * skin.c - skin conductance: a level that follows arousal, and responses of Bateman's shape (two
 * exponentials, 0.75 s and 2 s: Benedek & Kaernbach 2010, J Neurosci Methods 190:80, from memory).
 */
#include <math.h>

#include "random.h"
#include "signals.h"

static const double rise_s = 0.75, fall_s = 2.0;

/* Height 1. */
static double bateman(double u)
{
    double peak = log(fall_s / rise_s) * rise_s * fall_s / (fall_s - rise_s);
    double top = exp(-peak / fall_s) - exp(-peak / rise_s);
    return u <= 0 ? 0 : (exp(-u / fall_s) - exp(-u / rise_s)) / top;
}

static int respond(struct signals *signals, size_t count, double onset_s, double size_us,
                   struct err *err)
{
    size_t first = (size_t)fmax(0, onset_s * EDA_HZ);
    for (size_t i = first; i < count && i < first + 20 * EDA_HZ; i++)
        signals->eda[i] += (float)(size_us * bateman((double)i / EDA_HZ - onset_s));
    return truth_add(signals, onset_s, "skin-response", size_us, err);
}

static int respond_to_events(struct signals *signals, size_t count, struct random *random,
                             struct err *err)
{
    static const struct {
        const char *code;
        double size_us;
    } stimuli[] = {{"laryngoscopy", 0.9}, {"intubation", 1.2}, {"incision", 0.8},
                   {"trocar", 0.3},       {"movement", 1.0},   {"extubation", 1.3}};
    const struct scenario *scenario = &signals->scenario;
    for (size_t s = 0; s < sizeof stimuli / sizeof *stimuli; s++) {
        const struct happening *at = scenario_find(scenario, stimuli[s].code);
        double latency = random_uniform(random, 1.4, 2.4);
        int failed = respond(signals, count, at->at_s + latency, stimuli[s].size_us, err);
        if (failed)
            return failed;
    }
    return ERR_OK;
}

/* Those without a cause: four a minute awake, hardly any asleep. */
static int respond_by_chance(struct signals *signals, size_t count, struct random *random,
                             struct err *err)
{
    const struct scenario *scenario = &signals->scenario;
    for (double t = 5; t < scenario->length_s - 10;) {
        double a_minute = 0.15 + 4.0 * (1.0 - scenario_depth(scenario, t));
        t += fmax(3.0, fmin(60.0, -log(1.0 - random_uniform(random, 0, 1)) * 60.0 / a_minute));
        if (random_uniform(random, 0, 1) < scenario_depth(scenario, t))
            continue;
        int failed = respond(signals, count, t, random_uniform(random, 0.08, 0.6), err);
        if (failed)
            return failed;
    }
    return ERR_OK;
}

int skin_make(struct signals *signals, struct err *err)
{
    const struct scenario *scenario = &signals->scenario;
    struct random random;
    size_t count;
    random_seed(&random, signals->seed, STREAM_SKIN);
    int failed = samples_new(signals, EDA_HZ, &signals->eda, &count, err);
    double level = 4.2, shake = 0, moved_s = scenario_find(scenario, "movement")->at_s;
    for (size_t i = 0; i < count && !failed; i++) {
        double t = (double)i / EDA_HZ;
        double target =
            1.3 + 3.0 * (1.0 - scenario_depth(scenario, t)) + 0.8 * scenario_arousal(scenario, t);
        level += (target - level) / (45.0 * EDA_HZ);
        shake = t >= moved_s && t < moved_s + 6 ? 0.8 * shake + 0.5 * random_normal(&random) : 0;
        signals->eda[i] = (float)(level + shake + 0.004 * random_normal(&random));
    }
    if (!failed)
        failed = respond_to_events(signals, count, &random, err);
    if (!failed)
        failed = respond_by_chance(signals, count, &random, err);
    return failed;
}
