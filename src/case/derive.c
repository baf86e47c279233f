/*
 * derive.c - answering "derive NAME" for a case: which channels by role, which train first, and
 * keeping the answer. Computes nothing itself.
 */
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "case/casefile_impl.h"

enum { PARAMETER_MAX = 32 };

struct request {
    const struct derivation *derivation;
    const struct trace **channels; /* shape (channel_count) */
    size_t channel_count;
    double parameters[PARAMETER_MAX];
};

void kept_free(struct casefile *casefile)
{
    /* Last first: a derived trace may read an earlier one. */
    while (casefile->kept_count > 0) {
        struct kept *kept = casefile->kept[--casefile->kept_count];
        derived_free(&kept->derived);
        free(kept->key);
        free(kept);
    }
}

static bool fits(const struct derivation *derivation, const struct trace *trace)
{
    return !trace->times_ns && trace->role == derivation->role;
}

/* All even channels of the role in the first recording that has one. Leads of two devices are not
 * mixed: their clocks may disagree. Stops at a recording that cannot be read: it may be the one. */
static size_t channels_by_role(const struct casefile *casefile, const struct derivation *derivation,
                               const struct trace **out)
{
    size_t count = 0;
    for (size_t i = 0; i < casefile->loaded_count && count == 0; i++) {
        const struct loaded *loaded = casefile->loaded[i];
        if (!loaded->recording)
            break;
        for (size_t k = 0; k < loaded->attached.info->channel_count; k++) {
            if (loaded->shown[k] && fits(derivation, loaded->shown[k]))
                out[count++] = loaded->shown[k];
        }
    }
    return count;
}

/* What to do when something is not there: a recording that cannot be read is then the news. */
static const char *hint(const struct casefile *casefile, const char *otherwise)
{
    for (size_t i = 0; i < casefile->loaded_count; i++) {
        if (casefile->loaded[i]->problem[0])
            return casefile->loaded[i]->problem;
    }
    return otherwise;
}

static int choose_named(const struct casefile *casefile, const struct derivation *derivation,
                        const char *channel, struct request *request, struct err *err)
{
    const struct trace *trace = casefile_channel_find(casefile, channel);
    if (!trace)
        return err_set(err, ERR_NOT_FOUND, "no channel '%s'; %s", channel,
                       hint(casefile, "`incisura inspect` lists them"));
    if (derivation->role != ROLE_NONE && trace->times_ns)
        return err_set(err, ERR_USAGE, "%s: channel '%s' is an irregular trend, not a wave",
                       derivation->name, channel);
    request->channels[0] = trace;
    request->channel_count = 1;
    return ERR_OK;
}

static int choose_channels(const struct casefile *casefile, const struct derivation *derivation,
                           const char *channel, struct request *request, struct err *err)
{
    if (channel && *channel)
        return choose_named(casefile, derivation, channel, request, err);
    if (derivation->role == ROLE_NONE)
        return err_set(err, ERR_USAGE, "%s needs a channel; name one (--channel LABEL)",
                       derivation->name);
    request->channel_count = channels_by_role(casefile, derivation, request->channels);
    if (request->channel_count == 0)
        return err_set(
            err, ERR_NOT_FOUND, "%s needs a channel of role %s and there is none; %s",
            derivation->name, role_name(derivation->role),
            hint(casefile, "`incisura inspect` shows roles, --role LABEL=ROLE sets one"));
    if (derivation->one_channel && request->channel_count > 1)
        return err_set(err, ERR_USAGE, "%s takes one channel and %zu have role %s; name one",
                       derivation->name, request->channel_count, role_name(derivation->role));
    return ERR_OK;
}

/* What makes two requests the same: method, channels, parameters. */
static char *make_key(const struct request *request)
{
    struct str key = {0};
    str_put(&key, request->derivation->name);
    for (size_t i = 0; i < request->channel_count; i++)
        str_putf(&key, "|%s", request->channels[i]->name);
    size_t count = derivation_parameter_count(request->derivation);
    for (size_t i = 0; i < count; i++) {
        str_putc(&key, '|');
        str_put_double(&key, request->parameters[i]);
    }
    if (str_failed(&key)) {
        str_free(&key);
        return NULL;
    }
    return key.text;
}

static int compute(struct casefile *casefile, const struct request *request,
                   const struct train *train, struct progress *progress, struct kept **out,
                   struct err *err)
{
    struct derive_input input = {
        .channels = request->channels,
        .channel_count = request->channel_count,
        .train = train,
        .parameters = request->parameters,
        .threads = 1,
        .progress = progress,
    };
    casefile_extent(casefile, &input.from_ns, &input.to_ns);
    struct kept *made = calloc(1, sizeof *made);
    if (!made)
        return err_memory(err, request->derivation->name);
    int failed = request->derivation->compute(&input, &made->derived, err);
    if (failed) {
        free(made);
        return err_prefix(err, "%s", request->derivation->name);
    }
    *out = made;
    return ERR_OK;
}

/* Takes over `key`. */
static int keep(struct casefile *casefile, struct kept *made, char *key, struct err *err)
{
    int failed = array_reserve((void **)&casefile->kept, &casefile->kept_room,
                               casefile->kept_count + 1, sizeof *casefile->kept, err);
    if (failed) {
        derived_free(&made->derived);
        free(made);
        free(key);
        return failed;
    }
    made->key = key;
    casefile->kept[casefile->kept_count++] = made;
    return ERR_OK;
}

static const struct derived *find_kept(const struct casefile *casefile, const char *key)
{
    for (size_t i = 0; i < casefile->kept_count; i++) {
        if (strcmp(casefile->kept[i]->key, key) == 0)
            return &casefile->kept[i]->derived;
    }
    return NULL;
}

static int answer(struct casefile *casefile, const struct request *request, const char *channel,
                  struct progress *progress, const struct derived **out, struct err *err)
{
    char *key = make_key(request);
    if (!key)
        return err_memory(err, request->derivation->name);
    const struct derived *known = find_kept(casefile, key);
    if (known) {
        free(key);
        *out = known;
        return ERR_OK;
    }
    const struct derived *first = NULL;
    struct kept *made = NULL;
    int failed = ERR_OK;
    if (request->derivation->needs_train)
        failed = casefile_derive(casefile, request->derivation->needs_train, channel, NULL, 0,
                                 progress, &first, err);
    if (!failed)
        failed = compute(casefile, request, first ? &first->train : NULL, progress, &made, err);
    if (failed) {
        free(key);
        return failed;
    }
    failed = keep(casefile, made, key, err);
    if (!failed)
        *out = &made->derived;
    return failed;
}

int casefile_derive(struct casefile *casefile, const char *name, const char *channel,
                    const char *const *settings, size_t setting_count, struct progress *progress,
                    const struct derived **out, struct err *err)
{
    struct request request = {.derivation = derivation_find(name)};
    if (!request.derivation)
        return err_set(err, ERR_NOT_FOUND,
                       "no derivation '%s'; `incisura help derivations` lists them", name);
    if (derivation_parameter_count(request.derivation) > PARAMETER_MAX)
        return err_set(err, ERR_USAGE, "%s has more parameters than a request holds", name);
    int failed =
        derivation_parameters(request.derivation, settings, setting_count, request.parameters, err);
    if (failed)
        return failed;
    void *room = NULL;
    failed = array_new(&room, casefile->channel_count + 1, sizeof *request.channels, err);
    if (failed)
        return failed;
    request.channels = room;
    failed = choose_channels(casefile, request.derivation, channel, &request, err);
    if (!failed)
        failed = answer(casefile, &request, channel, progress, out, err);
    free(room);
    return failed;
}
