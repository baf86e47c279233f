/*
 * channel_trace.c - a channel as a trace: samples pass through, times go through the clock map.
 */
#include "trace/channel_trace.h"

#include <stdlib.h>
#include <string.h>

#include "base/array.h"

/* A range this short is read from the file rather than looked up. */
enum { SHORT_RANGE = 4 * OVERVIEW_BLOCK };

struct channel_trace {
    struct trace trace;
    const struct recording *recording;
    size_t channel;
    const struct overview *overview;
    char *name;
    struct run *runs;
    int64_t *times_ns;
};

static const struct channel_trace *self(const struct trace *trace)
{
    return (const struct channel_trace *)(const void *)trace;
}

static int channel_read(const struct trace *trace, int64_t first, int64_t count, float *out,
                        struct err *err)
{
    return recording_read(self(trace)->recording, self(trace)->channel, first, count, out, err);
}

static int channel_minmax(const struct trace *trace, int64_t first, int64_t count, float *low,
                          float *high, struct err *err)
{
    const struct channel_trace *channel = self(trace);
    if (channel->overview && count > SHORT_RANGE &&
        overview_minmax(channel->overview, channel->channel, first, count, low, high) ==
            OVERVIEW_EXACT)
        return ERR_OK;
    return recording_minmax(channel->recording, channel->channel, first, count, low, high, err);
}

static void channel_free(struct trace *trace)
{
    struct channel_trace *channel = (struct channel_trace *)(void *)trace;
    free(channel->name);
    free(channel->runs);
    free(channel->times_ns);
    free(channel);
}

static const struct trace_ops channel_ops = {channel_read, channel_minmax, channel_free};

bool is_channel_trace(const struct trace *trace)
{
    return trace->ops == &channel_ops;
}

void channel_trace_set_overview(struct trace *trace, const struct overview *overview)
{
    if (is_channel_trace(trace))
        ((struct channel_trace *)(void *)trace)->overview = overview;
}

bool channel_trace_minmax(const struct trace *trace, int64_t first, int64_t count, float *low,
                          float *high)
{
    const struct channel_trace *channel = self(trace);
    /* From a block on a look-up is quicker than reading, where it is built. */
    if (count >= OVERVIEW_BLOCK && channel->overview &&
        overview_minmax(channel->overview, channel->channel, first, count, low, high) ==
            OVERVIEW_EXACT)
        return true;
    return count <= SHORT_RANGE && trace_minmax(trace, first, count, low, high, NULL) == ERR_OK;
}

/* Times of an irregular channel, mapped. */
static int map_times(struct channel_trace *made, const struct channel *info,
                     const struct clock_map *map, struct err *err)
{
    void *times = NULL;
    int failed = array_new(&times, (size_t)info->samples, sizeof *made->times_ns, err);
    if (failed)
        return failed;
    made->times_ns = times;
    for (int64_t i = 0; i < info->samples; i++)
        made->times_ns[i] = clock_map_to_case(map, info->times_ns[i]);
    return ERR_OK;
}

static int map_runs(struct channel_trace *made, const struct channel *info,
                    const struct clock_map *map, struct err *err)
{
    void *runs = NULL;
    int failed = array_new(&runs, info->run_count, sizeof *made->runs, err);
    if (failed)
        return failed;
    made->runs = runs;
    clock_map_runs(map, info->runs, info->run_count, made->runs);
    return ERR_OK;
}

int channel_trace_new(const struct recording *recording, size_t channel, const char *name,
                      const struct clock_map *map, struct trace **out, struct err *err)
{
    const struct channel *info = &recording_info(recording)->channels[channel];
    void *memory = NULL;
    int failed = array_new_zero(&memory, 1, sizeof(struct channel_trace), err);
    if (failed)
        return failed;
    struct channel_trace *made = memory;
    made->recording = recording;
    made->channel = channel;
    made->name = strdup(name);
    failed = !made->name      ? err_memory(err, name)
             : info->times_ns ? map_times(made, info, map, err)
                              : map_runs(made, info, map, err);
    if (failed) {
        channel_free(&made->trace);
        return failed;
    }
    made->trace = (struct trace){
        .ops = &channel_ops,
        .name = made->name,
        .unit = info->unit,
        .role = info->role,
        .rate_hz = info->rate_hz,
        .samples = info->samples,
        .runs = made->runs,
        .run_count = made->runs ? info->run_count : 0,
        .times_ns = made->times_ns,
    };
    *out = &made->trace;
    return ERR_OK;
}
