/*
 * join.c - the parts of one live source as one: a session that was killed and begun again, or a
 * value that asked for another range, leaves several recordings of one device, and nobody should
 * have to name them.
 */
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "case/casefile_impl.h"
#include "trace/joined_trace.h"

static bool alike(const struct trace *a, const struct trace *b)
{
    return !a->times_ns && !b->times_ns && a->role == b->role && strcmp(a->unit, b->unit) == 0 &&
           fabs(a->rate_hz - b->rate_hz) <= 1e-6 * fabs(a->rate_hz) && b->run_count > 0 &&
           a->run_count > 0;
}

/* The channel of `loaded` that goes on where channel `k` of the first part ended; its index, or the
 * number of channels when there is none. */
static size_t counterpart(const struct loaded *first, size_t k, const struct loaded *loaded)
{
    const struct recording_info *info = loaded->attached.info;
    const char *label = first->attached.info->channels[k].label;
    size_t at = 0;
    while (at < info->channel_count && !(loaded->shown[at] == loaded->traces[at] &&
                                         strcmp(info->channels[at].label, label) == 0 &&
                                         alike(first->traces[k], loaded->traces[at])))
        at++;
    return at;
}

static bool same_source(const struct loaded *a, const struct loaded *b)
{
    return a->recording && b->recording && *a->source && strcmp(a->source, b->source) == 0;
}

/* The recording at `later`, if it goes on with channel `k` of the one at `index`; *at is where. */
static struct loaded *goes_on(const struct casefile *casefile, size_t index, size_t k, size_t later,
                              size_t *at)
{
    const struct loaded *first = casefile->loaded[index];
    struct loaded *loaded = casefile->loaded[later];
    if (!same_source(first, loaded))
        return NULL;
    *at = counterpart(first, k, loaded);
    return *at < loaded->attached.info->channel_count ? loaded : NULL;
}

static int keep_joined(struct casefile *casefile, struct trace *joined, struct err *err)
{
    int failed = array_reserve((void **)&casefile->joined, &casefile->joined_room,
                               casefile->joined_count + 1, sizeof *casefile->joined, err);
    if (failed)
        trace_free(joined);
    else
        casefile->joined[casefile->joined_count++] = joined;
    return failed;
}

/* Joins channel `k` of the recording at `index` with those of later parts of its source. Parts that
 * do not follow one another stay as they are. */
static int join_channel(struct casefile *casefile, size_t index, size_t k,
                        const struct trace **parts, struct err *err)
{
    struct trace *joined = NULL;
    size_t count = 0, at;
    parts[count++] = casefile->loaded[index]->traces[k];
    for (size_t i = index + 1; i < casefile->loaded_count; i++) {
        const struct loaded *loaded = goes_on(casefile, index, k, i, &at);
        if (loaded)
            parts[count++] = loaded->traces[at];
    }
    if (count == 1)
        return ERR_OK;
    int failed = joined_trace_new(parts, count, &joined, err);
    if (!failed)
        failed = keep_joined(casefile, joined, err);
    if (failed)
        return failed == ERR_CONFLICT ? ERR_OK : failed;
    for (size_t i = index + 1; i < casefile->loaded_count; i++) {
        struct loaded *loaded = goes_on(casefile, index, k, i, &at);
        if (loaded)
            loaded->shown[at] = NULL;
    }
    casefile->loaded[index]->shown[k] = joined;
    return ERR_OK;
}

/* Everything that is shown, in attach then file order. */
static void list_channels(struct casefile *casefile)
{
    casefile->channel_count = 0;
    for (size_t i = 0; i < casefile->loaded_count; i++) {
        const struct loaded *loaded = casefile->loaded[i];
        for (size_t k = 0; loaded->recording && k < loaded->attached.info->channel_count; k++) {
            if (loaded->shown[k])
                casefile->channels[casefile->channel_count++] = loaded->shown[k];
        }
    }
}

int casefile_join(struct casefile *casefile, struct err *err)
{
    void *room = NULL;
    int failed = array_new(&room, casefile->loaded_count + 1, sizeof(const struct trace *), err);
    for (size_t i = 0; i < casefile->loaded_count && !failed; i++) {
        const struct loaded *loaded = casefile->loaded[i];
        if (!loaded->recording || !*loaded->source)
            continue;
        for (size_t k = 0; k < loaded->attached.info->channel_count && !failed; k++) {
            if (loaded->shown[k] == loaded->traces[k])
                failed = join_channel(casefile, i, k, room, err);
        }
    }
    free(room);
    if (!failed)
        list_channels(casefile);
    return failed;
}

/* ---- finding and looking ---- */

const struct trace *casefile_channel_find(const struct casefile *casefile, const char *name)
{
    const struct trace *loose = NULL;
    /* Stops at a recording that cannot be read: the name may be that of one of its channels, and
     * the next recording's would be taken for it. */
    for (size_t i = 0; i < casefile->loaded_count && casefile->loaded[i]->recording; i++) {
        const struct loaded *loaded = casefile->loaded[i];
        for (size_t k = 0; k < loaded->attached.info->channel_count; k++) {
            const struct trace *shown = loaded->shown[k];
            if (shown && strcmp(shown->name, name) == 0)
                return shown;
            if (shown && !loose && ascii_equal(shown->name, name))
                loose = shown;
        }
    }
    return loose;
}

struct extremes_of {
    float low, high;
};

static bool widen(const struct trace *part, int64_t first, int64_t count, void *context)
{
    struct extremes_of *all = context;
    float low = NAN, high = NAN;
    if (!channel_trace_minmax(part, first, count, &low, &high))
        return false;
    all->low = fminf(all->low, low);
    all->high = fmaxf(all->high, high);
    return true;
}

bool casefile_minmax(const struct casefile *casefile, const struct trace *trace, int64_t first,
                     int64_t count, float *low, float *high)
{
    struct extremes_of all = {NAN, NAN};
    (void)casefile;
    if (is_channel_trace(trace))
        return channel_trace_minmax(trace, first, count, low, high);
    if (!is_joined_trace(trace))
        return trace_minmax(trace, first, count, low, high, NULL) == ERR_OK;
    if (!joined_trace_each(trace, first, count, widen, &all))
        return false;
    *low = all.low;
    *high = all.high;
    return true;
}
