/*
 * signals.c - the simulated body as a whole: memory, order of making, truth.
 */
#include "signals.h"

#include <stdlib.h>

#include "base/array.h"

int truth_add(struct signals *signals, double time_s, const char *event, double value,
              struct err *err)
{
    int failed = array_reserve((void **)&signals->truth, &signals->truth_room,
                               signals->truth_count + 1, sizeof *signals->truth, err);
    if (!failed)
        signals->truth[signals->truth_count++] = (struct truth){time_s, event, value};
    return failed;
}

int samples_new(const struct signals *signals, int rate_hz, float **out, size_t *count,
                struct err *err)
{
    *count = (size_t)(signals->scenario.length_s * rate_hz);
    return array_new_zero((void **)out, *count, sizeof **out, err);
}

int signals_make(struct signals *signals, double length_s, uint64_t seed, struct err *err)
{
    *signals = (struct signals){.seed = seed};
    scenario_init(&signals->scenario, length_s);
    int failed = breath_make(signals, err);
    if (!failed)
        failed = heart_make(signals, err);
    if (!failed)
        failed = skin_make(signals, err);
    if (!failed)
        failed = brain_make(signals, err);
    const struct scenario *scenario = &signals->scenario;
    for (size_t i = 0; i < scenario->count && !failed; i++)
        failed = truth_add(signals, scenario->list[i].at_s, scenario->list[i].code,
                           scenario->list[i].span_s, err);
    if (!failed)
        failed = truth_add(signals, scenario->gap_at_s, "gap", scenario->gap_span_s, err);
    if (!failed)
        failed = truth_add(signals, scenario->lead_off_s, "lead-off",
                           scenario->lead_on_s - scenario->lead_off_s, err);
    return failed;
}

void signals_free(struct signals *signals)
{
    float *arrays[] = {signals->ecg_ii, signals->ecg_v5,   signals->abp,
                       signals->pleth,  signals->resp,     signals->co2,
                       signals->eda,    signals->eeg_left, signals->eeg_right};
    for (size_t i = 0; i < sizeof arrays / sizeof *arrays; i++)
        free(arrays[i]);
    free(signals->beats_s);
    free(signals->breaths_s);
    free(signals->truth);
}
