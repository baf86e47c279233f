/*
 * verify.c - is the case what its history says? First the chain, then every mark, recording and
 * header field against the state that replaying the rows gives.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "store/store_impl.h"

/* State by replay: JSON objects by id. */
struct replay {
    struct store *store;
    json_t *header, *marks, *recordings, *sessions, *clocks;
    bool failed;
};

static json_t *slot(json_t *table, int64_t id)
{
    char key[24];
    (void)snprintf(key, sizeof key, "%lld", (long long)id);
    json_t *found = json_object_get(table, key);
    if (!found && json_object_set_new(table, key, json_object()) == 0)
        found = json_object_get(table, key);
    return found;
}

static int replay_row(const struct history_row *row, void *context)
{
    struct replay *replay = context;
    json_t *into = NULL;
    if (strncmp(row->action, "mark-", 5) == 0 || strcmp(row->action, "undo") == 0 ||
        strcmp(row->action, "redo") == 0)
        into = slot(replay->marks, row->object);
    else if (strcmp(row->action, "attach") == 0 || strcmp(row->action, "found") == 0)
        into = slot(replay->recordings, row->object);
    else if (strncmp(row->action, "session-", 8) == 0)
        into = slot(replay->sessions, row->object);
    else if (strcmp(row->action, "clock") == 0)
        into = slot(replay->clocks, row->object);
    else if (strcmp(row->action, "create") == 0 || strcmp(row->action, "epoch") == 0)
        into = replay->header;
    else
        return ERR_OK;
    json_t *after = json_loads(row->after, 0, NULL);
    replay->failed |= !into || !after || json_object_update(into, after) != 0;
    json_decref(after);
    return ERR_OK;
}

static int tell(struct store *store, const char *what, int64_t id, const char *field,
                const json_t *is, const json_t *said, struct err *err)
{
    char *a = is ? json_dumps(is, JSON_ENCODE_ANY | JSON_COMPACT) : NULL;
    char *b = said ? json_dumps(said, JSON_ENCODE_ANY | JSON_COMPACT) : NULL;
    int failed =
        err_set(err, ERR_CONFLICT, "%s: %s %lld: %s is %.120s, the history says %.120s",
                store->path, what, (long long)id, field, a ? a : "nothing", b ? b : "nothing");
    free(a);
    free(b);
    return failed;
}

/* Compares one object with the replayed one, and takes it out of the replay. */
static int compare(struct store *store, const char *what, int64_t id, json_t *table, json_t *is,
                   struct err *err)
{
    char key[24];
    const char *field;
    json_t *value;
    (void)snprintf(key, sizeof key, "%lld", (long long)id);
    json_t *said = json_object_get(table, key);
    if (!is)
        return err_memory(err, "verifying");
    int failed = ERR_OK;
    if (!said)
        failed = err_set(err, ERR_CONFLICT, "%s: %s %lld is not in the history", store->path, what,
                         (long long)id);
    json_object_foreach(is, field, value)
    {
        if (!failed && !json_equal(value, json_object_get(said, field)))
            failed = tell(store, what, id, field, value, json_object_get(said, field), err);
    }
    if (!failed)
        (void)json_object_del(table, key);
    json_decref(is);
    return failed;
}

static int none_left(struct store *store, const char *what, json_t *table, struct err *err)
{
    void *first = json_object_iter(table);
    if (!first)
        return ERR_OK;
    return err_set(err, ERR_CONFLICT, "%s: %s %s is in the history and not in the case any more",
                   store->path, what, json_object_iter_key(first));
}

/* As it is in the file now: another connection may have fixed the epoch since this one opened. */
static int compare_header(struct store *store, struct replay *replay, struct err *err)
{
    struct arena arena = {0};
    struct case_header now;
    json_t *table = json_object();
    int failed = header_read(store, &arena, &now, err);
    if (!failed && (!table || json_object_set(table, "0", replay->header) != 0))
        failed = err_memory(err, "verifying");
    if (!failed)
        failed = compare(store, "case", 0, table, header_to_json(&now), err);
    json_decref(table);
    arena_free(&arena);
    return failed;
}

static int compare_session(int64_t id, const struct live_session *session, void *context,
                           struct err *err)
{
    struct replay *replay = context;
    return compare(replay->store, "session", id, replay->sessions, session_to_json(session), err);
}

static int compare_clock(int64_t recording, const char *clock, void *context, struct err *err)
{
    struct replay *replay = context;
    json_t *is = json_pack("{s:s}", "clock", clock ? clock : "");
    return compare(replay->store, "clock of recording", recording, replay->clocks, is, err);
}

static int compare_live(struct store *store, struct replay *replay, struct err *err)
{
    int failed = sessions_each(store, compare_session, replay, err);
    if (!failed)
        failed = clocks_each(store, compare_clock, replay, err);
    if (!failed)
        failed = none_left(store, "session", replay->sessions, err);
    return failed ? failed : none_left(store, "clock of recording", replay->clocks, err);
}

static int compare_all(struct store *store, struct replay *replay, struct err *err)
{
    const struct mark *marks;
    const struct stored_recording *recordings = NULL;
    size_t mark_count = 0, recording_count = 0;
    marks_forget(store);
    store->recordings_known = false;
    int failed = store_marks(store, &marks, &mark_count, err);
    if (!failed)
        failed = store_recordings(store, &recordings, &recording_count, err);
    for (size_t i = 0; !failed && i < mark_count; i++)
        failed = compare(store, "mark", marks[i].id, replay->marks, mark_to_json(&marks[i]), err);
    for (size_t i = 0; !failed && i < recording_count; i++)
        failed = compare(store, "recording", recordings[i].id, replay->recordings,
                         recording_to_json(&recordings[i]), err);
    if (!failed)
        failed = none_left(store, "mark", replay->marks, err);
    if (!failed)
        failed = none_left(store, "recording", replay->recordings, err);
    if (!failed)
        failed = compare_live(store, replay, err);
    return failed ? failed : compare_header(store, replay, err);
}

/* What the comparison of texts and names cannot see, as it is in no value read: bytes after a NUL,
 * names that are none (a CHECK can be switched off), numbers out of range. */
static int check_readable(struct store *store, struct err *err)
{
    static const struct {
        const char *what, *sql;
    } rows[] = {
        {"mark", "SELECT min(id) FROM marks WHERE instr(CAST(code || unit || route || note || "
                 "rater || stamp_clock AS BLOB), x'00') OR state NOT IN ('incomplete', 'marked', "
                 "'confirmed', 'rejected') OR source NOT IN ('live', 'review', 'command', "
                 "'import')"},
        {"recording", "SELECT min(id) FROM recordings WHERE instr(CAST(path || digest || options "
                      "AS BLOB), x'00') OR length(digest) > 64"},
        {"case", "SELECT min(id) FROM case_info WHERE id <> 1 OR instr(CAST(subject || procedure "
                 "|| rater AS BLOB), x'00') OR utc_offset_s NOT BETWEEN -86400 AND 86400"},
    };
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        int64_t id;
        int failed = sql_integer(store, rows[i].sql, 0, &id, err);
        if (failed)
            return failed;
        if (id != 0)
            return err_set(err, ERR_CONFLICT,
                           "%s: %s %lld holds what the program never writes; it was altered",
                           store->path, rows[i].what, (long long)id);
    }
    return ERR_OK;
}

static int verify(struct store *store, int64_t *rows, int64_t *bad_seq, char head[DIGEST_TEXT_SIZE],
                  struct err *err)
{
    uint8_t digest[DIGEST_SIZE];
    struct replay replay = {store,         json_object(), json_object(), json_object(),
                            json_object(), json_object(), false};
    *bad_seq = 0;
    int failed =
        replay.header && replay.marks && replay.recordings && replay.sessions && replay.clocks
            ? history_check(store, rows, bad_seq, digest, err)
            : err_memory(err, "verifying");
    if (!failed)
        failed = store_history(store, replay_row, &replay, err);
    if (!failed && replay.failed)
        failed = err_set(err, ERR_CONFLICT, "%s: a history row cannot be read", store->path);
    if (!failed)
        failed = compare_all(store, &replay, err);
    if (!failed)
        failed = check_readable(store, err);
    if (!failed && head)
        digest_text(digest, head);
    json_decref(replay.header);
    json_decref(replay.marks);
    json_decref(replay.recordings);
    json_decref(replay.sessions);
    json_decref(replay.clocks);
    return failed;
}

int store_verify(struct store *store, int64_t *rows, int64_t *bad_seq, char head[DIGEST_TEXT_SIZE],
                 struct err *err)
{
    /* One view of the file throughout, whoever writes meanwhile. */
    int failed = sql_run(store, "BEGIN", err);
    if (failed)
        return failed;
    return sql_end(store, verify(store, rows, bad_seq, head, err), err);
}
