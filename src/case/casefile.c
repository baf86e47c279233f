/*
 * casefile.c - opening a case or a bare recording, attaching, and what both offer to readers.
 * Derivations are in derive.c, finding moved files in locate.c.
 */
#include "case/casefile.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "case/casefile_impl.h"
#include "store/live.h"
#include "timeline/clock_text.h"
#include "trace/channel_trace.h"

static const char sqlite_magic[] = "SQLite format 3";

static void loaded_free(struct loaded *loaded)
{
    if (!loaded)
        return;
    overview_close(loaded->attached.overview);
    for (size_t i = 0; loaded->traces && i < loaded->attached.info->channel_count; i++)
        trace_free(loaded->traces[i]);
    free(loaded->traces);
    free((void *)loaded->shown);
    recording_close(loaded->recording);
    arena_free(&loaded->clock_arena);
    free(loaded);
}

void casefile_close(struct casefile *casefile)
{
    if (!casefile)
        return;
    kept_free(casefile);
    for (size_t i = 0; i < casefile->joined_count; i++)
        trace_free(casefile->joined[i]);
    free(casefile->joined);
    for (size_t i = 0; i < casefile->loaded_count; i++)
        loaded_free(casefile->loaded[i]);
    codebook_free(casefile->codebook);
    store_close(casefile->store);
    free(casefile->loaded);
    free(casefile->channels);
    free(casefile->kept);
    free(casefile->path);
    free(casefile->name);
    free(casefile);
}

/* The name a channel goes by in the case: its label, or "LABEL @N" for the Nth recording when an
 * earlier one has the label already. */
static char *channel_name(const struct casefile *casefile, const char *label)
{
    struct str name = {0};
    str_put(&name, label);
    for (size_t i = 0; i < casefile->channel_count; i++) {
        if (strcmp(casefile->channels[i]->name, label) == 0) {
            str_putf(&name, " @%zu", casefile->loaded_count + 1);
            break;
        }
    }
    if (str_failed(&name)) {
        str_free(&name);
        return NULL;
    }
    return name.text;
}

static int add_traces(struct casefile *casefile, struct loaded *loaded, struct err *err)
{
    const struct recording_info *info = loaded->attached.info;
    void *traces = NULL, *shown = NULL;
    int failed = array_new_zero(&traces, info->channel_count, sizeof *loaded->traces, err);
    loaded->traces = traces;
    if (!failed)
        failed = array_new_zero(&shown, info->channel_count, sizeof *loaded->shown, err);
    loaded->shown = shown;
    for (size_t i = 0; i < info->channel_count && !failed; i++) {
        char *name = channel_name(casefile, info->channels[i].label);
        failed = name ? channel_trace_new(loaded->recording, i, name, &loaded->attached.map,
                                          &loaded->traces[i], err)
                      : err_memory(err, "a channel's name");
        free(name);
    }
    if (!failed)
        failed = array_reserve((void **)&casefile->channels, &casefile->channel_room,
                               casefile->channel_count + info->channel_count,
                               sizeof *casefile->channels, err);
    for (size_t i = 0; i < info->channel_count && !failed; i++)
        casefile->channels[casefile->channel_count++] = loaded->shown[i] = loaded->traces[i];
    return failed;
}

/* What a recording that was streamed came from. */
static int find_source(struct casefile *casefile, struct loaded *loaded, struct err *err)
{
    loaded->source = "";
    if (!casefile->store || loaded->attached.id <= 0)
        return ERR_OK;
    return store_stream_source(casefile->store, loaded->attached.id, &loaded->clock_arena,
                               &loaded->source, err);
}

/* The fitted clock of a recording, where it has one, instead of the wall clocks. */
static int fit_clock(struct casefile *casefile, struct loaded *loaded, struct err *err)
{
    struct clock_map *map = &loaded->attached.map;
    struct clock_piece *pieces = NULL;
    const char *text = "";
    int failed =
        casefile->store && loaded->attached.id > 0
            ? store_clock(casefile->store, loaded->attached.id, &loaded->clock_arena, &text, err)
            : ERR_OK;
    if (!failed)
        failed = clock_text_parse(text, &loaded->clock_arena, &pieces, &map->piece_count, err);
    if (!failed && map->piece_count > 0) {
        map->pieces = pieces;
        map->aligned = true;
    }
    return failed;
}

/* Opens the file at `path` into `loaded`, laid on case time by its fitted clock, or by the wall
 * clocks. */
static int load(struct casefile *casefile, struct loaded *loaded, const char *path,
                const struct reader_options *options, struct err *err)
{
    int failed = recording_open(path, options, &loaded->recording, err);
    if (failed)
        return failed;
    loaded->attached.recording = loaded->recording;
    loaded->attached.info = recording_info(loaded->recording);
    /* The first recording that knows its wall clock gives the case its epoch. */
    if (casefile->epoch_civil_ns == NS_NONE)
        casefile->epoch_civil_ns = loaded->attached.info->start_civil_ns;
    loaded->attached.map =
        clock_map_on_trust(loaded->attached.info->start_civil_ns, casefile->epoch_civil_ns);
    failed = find_source(casefile, loaded, err);
    if (!failed)
        failed = fit_clock(casefile, loaded, err);
    return failed ? failed : add_traces(casefile, loaded, err);
}

static int append(struct casefile *casefile, struct loaded *loaded, struct err *err)
{
    int failed = array_reserve((void **)&casefile->loaded, &casefile->loaded_room,
                               casefile->loaded_count + 1, sizeof *casefile->loaded, err);
    if (!failed)
        casefile->loaded[casefile->loaded_count++] = loaded;
    return failed;
}

static struct loaded *loaded_new(int64_t id, const char *digest)
{
    struct loaded *made = calloc(1, sizeof *made);
    if (!made)
        return NULL;
    made->attached.id = id;
    (void)snprintf(made->digest, sizeof made->digest, "%s", digest);
    made->attached.digest = made->digest;
    made->attached.problem = made->problem;
    return made;
}

/* Locates and opens one stored recording. That its file is gone is a problem of the recording, to
 * be shown, not an error of the case. */
static int load_stored(struct casefile *casefile, const struct stored_recording *stored,
                       struct err *err)
{
    struct loaded *loaded = loaded_new(stored->id, stored->digest);
    if (!loaded)
        return err_memory(err, stored->path);
    /* Texts of its own: those of the store's list go when a file is found elsewhere. */
    struct arena arena = {0};
    struct stored_recording own = *stored;
    own.path = arena_string(&arena, stored->path);
    own.options = arena_string(&arena, stored->options);
    struct reader_options options = {0};
    struct err why = {0};
    char *path = NULL;
    int failed = own.path && own.options ? options_parse(own.options, &arena, &options, &why)
                                         : err_memory(&why, "a recording");
    if (!failed)
        failed = locate_recording(casefile, &own, &path, &why);
    if (!failed)
        failed = load(casefile, loaded, path, &options, &why);
    free(path);
    arena_free(&arena);
    if (failed == ERR_MEMORY) {
        loaded_free(loaded);
        return err_set(err, failed, "%s", why.text);
    }
    if (failed)
        (void)snprintf(loaded->problem, sizeof loaded->problem, "%.*s",
                       (int)sizeof loaded->problem - 1, why.text);
    failed = append(casefile, loaded, err);
    if (failed)
        loaded_free(loaded);
    return failed;
}

static int load_all_stored(struct casefile *casefile, struct err *err)
{
    const struct stored_recording *stored;
    size_t count;
    int failed = store_recordings(casefile->store, &stored, &count, err);
    for (size_t i = 0; i < count && !failed; i++) {
        /* The list is only valid until a recording found elsewhere is written back. */
        failed = store_recordings(casefile->store, &stored, &count, err);
        if (!failed)
            failed = load_stored(casefile, &stored[i], err);
    }
    return failed ? failed : casefile_join(casefile, err);
}

static int open_case(struct casefile *casefile, enum store_mode mode, const char *rater,
                     struct err *err)
{
    int failed = store_open(casefile->path, mode, rater, &casefile->store, err);
    if (failed)
        return failed;
    const struct case_header *header = store_header(casefile->store);
    casefile->epoch_civil_ns = header->epoch_civil_ns;
    casefile->utc_offset_s = header->utc_offset_s;
    failed = codebook_parse(header->codebook_text, header->codebook_size, casefile->path,
                            &casefile->codebook, err);
    return failed ? failed : load_all_stored(casefile, err);
}

static int open_bare(struct casefile *casefile, const struct reader_options *options,
                     struct err *err)
{
    struct loaded *loaded = loaded_new(0, "");
    if (!loaded)
        return err_memory(err, casefile->path);
    int failed = load(casefile, loaded, casefile->path, options, err);
    if (!failed)
        failed = append(casefile, loaded, err);
    if (failed) {
        loaded_free(loaded);
        return failed;
    }
    return codebook_parse(default_codebook_text, default_codebook_size, "default codebook",
                          &casefile->codebook, err);
}

/* The file name without a ".case" ending. */
static char *case_name(const char *path)
{
    const char *name = path_name(path);
    size_t length = strlen(name);
    if (path_has_suffix(name, ".case") && length > 5)
        length -= 5;
    return strndup(name, length);
}

static int is_case(const char *path, bool *out, struct err *err)
{
    struct mapped mapped;
    int failed = disk_files.map(&disk_files, path, &mapped, err);
    if (failed)
        return failed;
    *out = mapped.size >= sizeof sqlite_magic &&
           memcmp(mapped.data, sqlite_magic, sizeof sqlite_magic) == 0;
    disk_files.unmap(&disk_files, &mapped);
    return ERR_OK;
}

int casefile_open(const char *path, enum store_mode mode, const char *rater,
                  const struct reader_options *bare, struct casefile **out, struct err *err)
{
    static const struct reader_options no_options = {0};
    bool stored = false;
    int failed = is_case(path, &stored, err);
    if (failed)
        return failed;
    if (!stored && (mode == STORE_WRITE || path_has_suffix(path, ".case")))
        return err_set(err, ERR_FORMAT,
                       "%s: not a case; make one with `incisura start` and attach recordings to it",
                       path);
    struct casefile *made = calloc(1, sizeof *made);
    if (!made)
        return err_memory(err, path);
    made->epoch_civil_ns = NS_NONE;
    made->path = strdup(path);
    made->name = case_name(path);
    if (!made->path || !made->name)
        failed = err_memory(err, path);
    else if (stored)
        failed = open_case(made, mode, rater, err);
    else
        failed = open_bare(made, bare ? bare : &no_options, err);
    if (failed) {
        casefile_close(made);
        return failed;
    }
    *out = made;
    return ERR_OK;
}

/* Writes the attachment into the store; sets the loaded recording's id. */
static int attach_stored(struct casefile *casefile, struct loaded *loaded, const char *path,
                         const struct reader_options *options, struct err *err)
{
    struct str text = {0};
    char *absolute = realpath(path, NULL);
    struct stored_recording stored = {.path = absolute,
                                      .start_civil_ns = loaded->attached.info->start_civil_ns};
    int failed = absolute ? options_text(options, &text, err) : err_errno(err, path, "find it");
    if (!failed)
        failed = recording_state(path, &stored.size, &stored.modified_ns, err);
    if (!failed) {
        stored.options = str_text(&text);
        memcpy(stored.digest, loaded->digest, sizeof stored.digest);
        failed = store_recording_add(casefile->store, &stored, &loaded->attached.id, err);
    }
    free(absolute);
    str_free(&text);
    return failed;
}

/* Stores the attachment, and the epoch when this recording gave it. */
static int store_attachment(struct casefile *casefile, struct loaded *loaded, const char *path,
                            const struct reader_options *options, struct err *err)
{
    int failed = attach_stored(casefile, loaded, path, options, err);
    bool fix = store_header(casefile->store)->epoch_civil_ns == NS_NONE &&
               casefile->epoch_civil_ns != NS_NONE;
    if (!failed && fix)
        failed = store_epoch_fix(casefile->store, casefile->epoch_civil_ns, err);
    return failed;
}

int casefile_attach(struct casefile *casefile, const char *path,
                    const struct reader_options *options, struct progress *progress,
                    struct err *err)
{
    static const struct reader_options no_options = {0};
    const struct reader_options *chosen = options ? options : &no_options;
    char digest[DIGEST_TEXT_SIZE];
    if (!casefile->store)
        return err_set(err, ERR_USAGE, "%s: a bare recording takes no attachment; start a case",
                       casefile->path);
    int failed = recording_digest(path, progress, digest, err);
    if (failed)
        return failed;
    struct loaded *loaded = loaded_new(0, digest);
    if (!loaded)
        return err_memory(err, path);
    size_t channels_before = casefile->channel_count;
    int64_t epoch_before = casefile->epoch_civil_ns;
    failed = load(casefile, loaded, path, chosen, err);
    if (!failed)
        failed = array_reserve((void **)&casefile->loaded, &casefile->loaded_room,
                               casefile->loaded_count + 1, sizeof *casefile->loaded, err);
    if (!failed)
        failed = store_attachment(casefile, loaded, path, chosen, err);
    if (!failed)
        failed = append(casefile, loaded, err);
    if (failed) {
        casefile->channel_count = channels_before;
        casefile->epoch_civil_ns = epoch_before;
        loaded_free(loaded);
    }
    return failed;
}

struct store *casefile_release_store(struct casefile *casefile)
{
    struct store *store = casefile->store;
    casefile->store = NULL;
    return store;
}

const char *casefile_name(const struct casefile *casefile)
{
    return casefile->name;
}

const char *casefile_path(const struct casefile *casefile)
{
    return casefile->path;
}

struct store *casefile_store(struct casefile *casefile)
{
    return casefile->store;
}

const struct codebook *casefile_codebook(const struct casefile *casefile)
{
    return casefile->codebook;
}

int64_t casefile_epoch_civil_ns(const struct casefile *casefile)
{
    return casefile->epoch_civil_ns;
}

int casefile_utc_offset_s(const struct casefile *casefile)
{
    return casefile->utc_offset_s;
}

size_t casefile_recording_count(const struct casefile *casefile)
{
    return casefile->loaded_count;
}

const struct attached *casefile_recording(const struct casefile *casefile, size_t index)
{
    return &casefile->loaded[index]->attached;
}

size_t casefile_channel_count(const struct casefile *casefile)
{
    return casefile->channel_count;
}

const struct trace *casefile_channel(const struct casefile *casefile, size_t index)
{
    return casefile->channels[index];
}

static void widen(int64_t from_ns, int64_t to_ns, bool *any, int64_t *low, int64_t *high)
{
    *low = !*any || from_ns < *low ? from_ns : *low;
    *high = !*any || to_ns > *high ? to_ns : *high;
    *any = true;
}

void casefile_extent(const struct casefile *casefile, int64_t *from_ns, int64_t *to_ns)
{
    bool any = false;
    *from_ns = *to_ns = 0;
    for (size_t i = 0; i < casefile->loaded_count; i++) {
        const struct attached *attached = &casefile->loaded[i]->attached;
        if (attached->info)
            widen(clock_map_to_case(&attached->map, 0),
                  clock_map_to_case(&attached->map, attached->info->span_ns), &any, from_ns, to_ns);
    }
    const struct mark *marks;
    size_t count;
    if (!casefile->store || store_marks(casefile->store, &marks, &count, NULL))
        return;
    for (size_t i = 0; i < count; i++) {
        int64_t until = marks[i].until_ns == NS_NONE ? marks[i].onset_ns : marks[i].until_ns;
        widen(marks[i].onset_ns, until + 1, &any, from_ns, to_ns);
    }
}

/* "S-204.3.overview" beside the case; NULL for a bare recording, which leaves nothing behind. */
static char *overview_path(const struct casefile *casefile, int64_t id)
{
    char name[300];
    (void)snprintf(name, sizeof name, "%.200s.%lld.overview", casefile->name, (long long)id);
    return path_beside(casefile->path, name);
}

int casefile_overviews(struct casefile *casefile, int threads, struct err *err)
{
    for (size_t i = 0; i < casefile->loaded_count; i++) {
        struct loaded *loaded = casefile->loaded[i];
        if (!loaded->recording || loaded->attached.overview)
            continue;
        char *path = casefile->store ? overview_path(casefile, loaded->attached.id) : NULL;
        if (casefile->store && !path)
            return err_memory(err, "an overview");
        int failed = overview_open(loaded->recording, loaded->digest, path, threads,
                                   &loaded->attached.overview, err);
        free(path);
        if (failed)
            return failed;
        for (size_t k = 0; k < loaded->attached.info->channel_count; k++)
            channel_trace_set_overview(loaded->traces[k], loaded->attached.overview);
    }
    return ERR_OK;
}

int casefile_time(const struct casefile *casefile, const char *text, int64_t *out_ns,
                  struct err *err)
{
    struct time_arg arg;
    int failed = time_arg_parse(text, &arg, err);
    if (failed)
        return failed;
    if (casefile->epoch_civil_ns == NS_NONE && arg.kind != TIME_ARG_FROM_START)
        return err_set(err, ERR_USAGE,
                       "time '%s' needs the case's start, which is not known yet; attach a "
                       "recording first, or write it from the start: +00:34:07.5",
                       text);
    *out_ns = time_arg_resolve(&arg, casefile->epoch_civil_ns, casefile->utc_offset_s);
    return ERR_OK;
}
