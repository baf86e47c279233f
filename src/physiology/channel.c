/*
 * channel.c - the derivation `channel`: the samples themselves, so that a raw signal can be asked
 * for in the same words as a derived one. Copies nothing: each read goes to the input.
 */
#include <stdlib.h>

#include "base/array.h"
#include "physiology/derivation.h"

struct passing_trace {
    struct trace trace;
    const struct trace *input;
};

static const struct trace *input_of(const struct trace *trace)
{
    return ((const struct passing_trace *)(const void *)trace)->input;
}

static int passing_read(const struct trace *trace, int64_t first, int64_t count, float *out,
                        struct err *err)
{
    return trace_read(input_of(trace), first, count, out, err);
}

static int passing_minmax(const struct trace *trace, int64_t first, int64_t count, float *low,
                          float *high, struct err *err)
{
    return trace_minmax(input_of(trace), first, count, low, high, err);
}

static void passing_free(struct trace *trace)
{
    free(trace);
}

static const struct trace_ops passing_ops = {passing_read, passing_minmax, passing_free};

static int compute_channel(const struct derive_input *input, struct derived *out, struct err *err)
{
    if (input->channel_count != 1)
        return err_set(err, ERR_USAGE, "channel takes one channel, not %zu: name it",
                       input->channel_count);
    void *made;
    int failed = array_new_zero(&made, 1, sizeof(struct passing_trace), err);
    if (failed)
        return failed;
    struct passing_trace *passing = made;
    passing->input = input->channels[0];
    passing->trace = *passing->input;
    passing->trace.ops = &passing_ops;
    out->trace = &passing->trace;
    return ERR_OK;
}

const struct derivation derivation_channel = {
    .name = "channel",
    .kind = DERIVES_TRACE,
    .role = ROLE_NONE,
    .one_channel = true,
    .needs_train = NULL,
    .unit = NULL,
    .parameters = NULL,
    .summary = "the samples of a channel as they are",
    .source = "none: nothing is computed",
    .edges = "A sample that the recording lacks is not valid; no other sample is touched.",
    .version = "1",
    .compute = compute_channel,
};
