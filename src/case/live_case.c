/*
 * live_case.c - beginning a session, and taking in the streams that sessions left. Draws nothing,
 * starts no thread.
 */
#include "case/live_case.h"

#include <dirent.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "base/machine.h"
#include "case/casefile_impl.h"
#include "recording/edf_repair.h"
#include "store/second_place.h"
#include "timeline/clock_text.h"

/* How far apart two boots' clocks may be when the wall clock ties them: it is read from a clock
 * chip of whole seconds at start-up, and may be set by the network later. */
static const int64_t boot_tie_error_ns = NS_PER_S;

static void tie_by_wall_clock(const struct casefile *casefile, struct live_session *session)
{
    int64_t civil_ns = session->begun_utc_ns + casefile_utc_offset_s(casefile) * NS_PER_S;
    if (casefile_epoch_civil_ns(casefile) == NS_NONE) {
        civil_ns = session->begun_utc_ns + utc_offset_now_s() * NS_PER_S;
        session->epoch_civil_ns = civil_ns;
    }
    session->case_minus_boottime_ns = civil_ns - session->epoch_civil_ns - boottime_now_ns();
}

int live_case_session(struct casefile *casefile, const char *rater, struct live_session *out,
                      char *tie, size_t size, struct err *err)
{
    struct live_session last, made = {.epoch_civil_ns = casefile_epoch_civil_ns(casefile),
                                      .begun_utc_ns = utc_now_ns(),
                                      .ended_utc_ns = NS_NONE,
                                      .pid = getpid()};
    bool any;
    if (strlen(rater) >= sizeof made.rater)
        return err_set(err, ERR_USAGE, "rater '%.20s...' is longer than %zu bytes; use a short id",
                       rater, sizeof made.rater - 1);
    int failed = store_session_last(casefile_store(casefile), &last, &any, err);
    if (failed)
        return failed;
    random_id(made.uid);
    host_name(made.host);
    machine_id(made.machine);
    boot_id(made.boot_id);
    made.process_start = process_start_ticks(made.pid);
    (void)snprintf(made.rater, sizeof made.rater, "%s", rater);
    tie[0] = '\0';
    if (any && strcmp(last.boot_id, made.boot_id) == 0 && made.epoch_civil_ns != NS_NONE) {
        made.case_minus_boottime_ns = last.case_minus_boottime_ns;
        made.tie_error_ns = last.tie_error_ns;
    } else {
        tie_by_wall_clock(casefile, &made);
        made.tie_error_ns = any ? boot_tie_error_ns : 0;
        if (any)
            (void)snprintf(tie, size,
                           "this machine was started again (or is another one): case time goes on "
                           "by its wall clock, good to about %g s",
                           s_from_ns(made.tie_error_ns));
    }
    *out = made;
    return ERR_OK;
}

/* ---- streams ---- */

int live_case_keep(struct saver *saver, struct live_stream *stream, const char *source,
                   struct err *err)
{
    struct live_status status;
    struct str clock = {0};
    int failed = ERR_OK;
    live_stream_status(stream, &status);
    for (size_t i = 0; i < status.part_count && !failed; i++) {
        struct live_part part;
        failed = live_stream_part(stream, i, &part, err);
        str_clear(&clock);
        if (!failed)
            clock_text_put(&clock, part.pieces, part.piece_count);
        if (!failed && str_failed(&clock))
            failed = err_memory(err, "a clock");
        struct stored_stream kept = {.path = failed ? "" : part.path,
                                     .session = "",
                                     .source = source,
                                     .clock = str_text(&clock)};
        if (!failed)
            failed = saver_stream(saver, &kept, err);
    }
    str_free(&clock);
    return failed;
}

/* The file, where it was or beside the case; the caller frees. NULL when it is gone. */
static char *stream_file(struct store *store, const char *path)
{
    if (access(path, F_OK) == 0)
        return strdup(path);
    char *beside = path_beside(store_path(store), path_name(path));
    if (beside && access(beside, F_OK) == 0)
        return beside;
    free(beside);
    return NULL;
}

/* What the store keeps of the file; *samples = 0 when there is nothing in it. */
static int describe(const char *path, struct stored_recording *out, int64_t *samples,
                    struct err *err)
{
    struct recording *recording = NULL;
    int failed = recording_open(path, NULL, &recording, err);
    if (failed)
        return failed;
    const struct recording_info *info = recording_info(recording);
    *samples = info->channel_count > 0 ? info->channels[0].samples : 0;
    out->path = path;
    out->options = "";
    out->start_civil_ns = info->start_civil_ns;
    recording_close(recording);
    failed = recording_state(path, &out->size, &out->modified_ns, err);
    return failed ? failed : recording_digest(path, NULL, out->digest, err);
}

static int attach(struct store *store, const struct stored_stream *stream, const char *path,
                  int64_t *attached, struct err *err)
{
    struct stored_recording recording = {0};
    int64_t id, samples = 0;
    int failed = edf_repair(path, err);
    if (!failed)
        failed = describe(path, &recording, &samples, err);
    /* Killed before a header or a record was whole: there is nothing to attach. */
    if (failed == ERR_FORMAT || (!failed && samples == 0))
        return store_stream_drop(store, stream->path, err);
    if (!failed)
        failed = store_stream_attach(store, stream, &recording, &id, err);
    *attached += !failed;
    return failed;
}

static int adopt(struct store *store, const struct stored_stream *stream, int64_t most_bytes,
                 int64_t *attached, struct err *err)
{
    struct stat state;
    char *found = stream_file(store, stream->path);
    if (!found)
        return store_stream_drop(store, stream->path, err);
    char *path = realpath(found, NULL);
    int failed = path && stat(path, &state) == 0 ? ERR_OK : err_errno(err, found, "find it");
    if (!failed && state.st_size <= most_bytes)
        failed = attach(store, stream, path, attached, err);
    free(path);
    free(found);
    return failed;
}

int live_case_adopt(struct store *store, int64_t most_bytes, int64_t *attached, struct err *err)
{
    struct arena arena = {0};
    struct stored_stream *streams;
    size_t count;
    *attached = 0;
    int failed = store_streams(store, &arena, &streams, &count, err);
    /* One that cannot be taken in just now is no reason to leave the others lying. */
    for (size_t i = 0; i < count; i++) {
        struct err why = {0};
        bool runs;
        int also = store_session_runs(store, streams[i].session, &runs, &why);
        if (!also && !runs)
            also = adopt(store, &streams[i], most_bytes, attached, &why);
        if (also && !failed)
            failed = err_set(err, also, "%s", why.text);
    }
    arena_free(&arena);
    return failed;
}

/* Is `path` the file of a recording, or of a stream that has not become one yet? */
static bool known(const char *path, const struct stored_recording *recordings,
                  size_t recording_count, const struct stored_stream *streams, size_t stream_count)
{
    const char *name = path_name(path);
    for (size_t i = 0; i < recording_count; i++) {
        if (strcmp(path_name(recordings[i].path), name) == 0)
            return true;
    }
    for (size_t i = 0; i < stream_count; i++) {
        if (strcmp(path_name(streams[i].path), name) == 0)
            return true;
    }
    return false;
}

static int count_strays(struct store *store, int64_t *out, struct err *err)
{
    struct arena arena = {0};
    const struct stored_recording *recordings = NULL;
    struct stored_stream *streams = NULL;
    size_t recording_count = 0, stream_count = 0, stem = strlen(path_name(store_path(store)));
    char *folder = path_beside(store_path(store), ".");
    if (path_has_suffix(store_path(store), ".case"))
        stem -= strlen(".case");
    int failed = folder ? store_recordings(store, &recordings, &recording_count, err)
                        : err_memory(err, "a folder");
    if (!failed)
        failed = store_streams(store, &arena, &streams, &stream_count, err);
    DIR *listing = failed ? NULL : opendir(folder);
    for (struct dirent *entry; listing && (entry = readdir(listing));) {
        const char *name = entry->d_name;
        bool ours = strncmp(name, path_name(store_path(store)), stem) == 0 &&
                    strncmp(name + stem, "-live-", 6) == 0 && path_has_suffix(name, ".bdf");
        *out += ours && !known(name, recordings, recording_count, streams, stream_count);
    }
    if (listing)
        (void)closedir(listing);
    free(folder);
    arena_free(&arena);
    return failed;
}

int live_case_settle(struct store *store, int64_t most_bytes, struct settled *out, struct err *err)
{
    struct err first = {0};
    int failed = second_place_take(store, &out->changes, &out->damaged, &first);
    /* One that fails is no reason to leave the other undone. */
    int also = live_case_adopt(store, most_bytes, &out->recordings, failed ? NULL : &first);
    struct live_session last;
    bool any = false;
    /* One that runs may be about to note its file. */
    if (!failed && !also)
        failed = store_session_last(store, &last, &any, &first);
    if (!failed && !also && !(any && live_session_alive(&last)))
        failed = count_strays(store, &out->strays, &first);
    if (failed || also)
        return err_set(err, failed ? failed : also, "%s", first.text);
    return ERR_OK;
}
