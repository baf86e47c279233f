/*
 * beats.c - the derivation `beats`: R peaks of the ECG. Says which leads can be used; the work is
 * in ecg_beats.c.
 */
#include <stdlib.h>

#include "base/array.h"
#include "physiology/derivation.h"
#include "physiology/ecg_beats.h"
#include "physiology/ecg_lead.h"

static int no_lead(const struct derive_input *input, struct err *err)
{
    if (input->channel_count == 0)
        return err_set(err, ERR_USAGE,
                       "beats needs an ECG channel; give a channel the role ecg with --role");
    return err_set(err, ERR_USAGE,
                   "%s: beats needs an evenly sampled ECG of at least %d Hz; this has %g Hz",
                   input->channels[0]->name, ECG_LEAST_RATE_HZ, input->channels[0]->rate_hz);
}

static int compute_beats(const struct derive_input *input, struct derived *out, struct err *err)
{
    void *made;
    int failed = array_new(&made, input->channel_count, sizeof(const struct trace *), err);
    if (failed)
        return failed;
    const struct trace **leads = made;
    size_t count = 0;
    for (size_t i = 0; i < input->channel_count; i++) {
        const struct trace *channel = input->channels[i];
        if (channel->run_count > 0 && channel->rate_hz >= ECG_LEAST_RATE_HZ)
            leads[count++] = channel;
    }
    failed = count == 0 ? no_lead(input, err)
                        : ecg_beats(leads, count, ECG_BLOCK, input->progress, &out->train, err);
    free(made);
    return failed;
}

const struct derivation derivation_beats = {
    .name = "beats",
    .kind = DERIVES_TRAIN,
    .role = ROLE_ECG,
    .one_channel = false,
    .needs_train = NULL,
    .unit = NULL,
    .parameters = NULL,
    .summary = "R peaks of the ECG, from all its leads together; the value is the height above the "
               "baseline",
    .source =
        "Pan & Tompkins 1985, IEEE Trans Biomed Eng 32:230, with the medians and the detection "
        "coefficient of Hamilton & Tompkins 1986, IEEE Trans Biomed Eng 33:1157; departures "
        "are named in the sources (ecg_lead.c, ecg_fuse.c, qrs.c)",
    .edges =
        "No beat is reported where every lead is missing for more than 20 ms; the first one "
        "after such a stretch is flagged, since the interval before it is none. Beats amid noise "
        "(cautery), and weak ones taken at a second look, are flagged as doubtful. The whole "
        "recording is searched whatever part is asked for, so that a part never differs.",
    .version = "1",
    .compute = compute_beats,
};
