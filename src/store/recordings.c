/*
 * recordings.c - which recordings a case has: path, size, digest. Opens none of them.
 */
#include <string.h>

#include "base/array.h"
#include "base/str.h"
#include "store/store_impl.h"

json_t *recording_to_json(const struct stored_recording *recording)
{
    return json_pack("{s:s, s:I, s:s, s:s, s:o}", "path", recording->path, "size",
                     (json_int_t)recording->size, "digest", recording->digest, "options",
                     recording->options ? recording->options : "", "start_civil_ns",
                     recording->start_civil_ns == NS_NONE
                         ? json_null()
                         : json_integer(recording->start_civil_ns));
}

static void forget(struct store *store)
{
    store->recordings_known = false;
    store->recording_count = 0;
    arena_free(&store->recording_arena);
}

static int take(struct store *store, sqlite3_stmt *statement, struct err *err)
{
    struct stored_recording row = {
        .id = sqlite3_column_int64(statement, 0),
        .path = sql_column_text(statement, 1, &store->recording_arena),
        .size = sqlite3_column_int64(statement, 2),
        .modified_ns = sqlite3_column_int64(statement, 3),
        .options = sql_column_text(statement, 5, &store->recording_arena),
        .start_civil_ns = sql_column_time(statement, 6),
    };
    const char *digest = (const char *)sqlite3_column_text(statement, 4);
    if (!row.path || !row.options || !digest)
        return err_memory(err, "a recording");
    (void)strncat(row.digest, digest, sizeof row.digest - 1);
    int failed = array_reserve((void **)&store->recordings, &store->recording_room,
                               store->recording_count + 1, sizeof *store->recordings, err);
    if (!failed)
        store->recordings[store->recording_count++] = row;
    return failed;
}

int store_recordings(struct store *store, const struct stored_recording **out, size_t *count,
                     struct err *err)
{
    sqlite3_stmt *statement;
    int code = SQLITE_DONE, failed = ERR_OK;
    if (!store->recordings_known) {
        forget(store);
        failed = sql_prepare(store,
                             "SELECT id, path, size, modified_ns, digest, options, "
                             "start_civil_ns FROM recordings ORDER BY id",
                             &statement, err);
        if (failed)
            return failed;
        while (!failed && (code = sqlite3_step(statement)) == SQLITE_ROW)
            failed = take(store, statement, err);
        if (!failed && code != SQLITE_DONE)
            failed = sql_error(store, code, err);
        (void)sqlite3_finalize(statement);
        store->recordings_known = !failed;
    }
    if (!failed) {
        *out = store->recordings;
        *count = store->recording_count;
    }
    return failed;
}

static int insert(struct store *store, const struct stored_recording *recording, int64_t *id,
                  struct err *err)
{
    sqlite3_stmt *statement;
    int failed = sql_prepare(store,
                             "INSERT INTO recordings (path, size, modified_ns, digest, options, "
                             "start_civil_ns) VALUES (?, ?, ?, ?, ?, ?)",
                             &statement, err);
    if (failed)
        return failed;
    (void)sqlite3_bind_text(statement, 1, recording->path, -1, SQLITE_STATIC);
    (void)sqlite3_bind_int64(statement, 2, recording->size);
    (void)sqlite3_bind_int64(statement, 3, recording->modified_ns);
    (void)sqlite3_bind_text(statement, 4, recording->digest, -1, SQLITE_STATIC);
    (void)sqlite3_bind_text(statement, 5, recording->options ? recording->options : "", -1,
                            SQLITE_STATIC);
    sql_bind_time(statement, 6, recording->start_civil_ns);
    failed = sql_finish(store, statement, err);
    if (!failed)
        *id = sqlite3_last_insert_rowid(store->db);
    return failed;
}

static int log_json(struct store *store, const char *action, int64_t id, json_t *before,
                    json_t *after, struct err *err)
{
    struct history_entry entry = {action, id, 0, before, after, ""};
    int failed = after ? history_append(store, &entry, err) : err_memory(err, action);
    json_decref(before);
    json_decref(after);
    return failed;
}

/* Inside the caller's transaction, so that no other connection attaches it in between. */
int recording_add_inside(struct store *store, const struct stored_recording *recording, int64_t *id,
                         struct err *err)
{
    const struct stored_recording *known;
    size_t count;
    forget(store);
    int failed = store_recordings(store, &known, &count, err);
    for (size_t i = 0; i < count && !failed; i++) {
        if (strcmp(known[i].digest, recording->digest) == 0)
            failed = err_set(err, ERR_CONFLICT, "%s: attached already, as recording %lld",
                             recording->path, (long long)known[i].id);
    }
    if (!failed)
        failed = insert(store, recording, id, err);
    if (!failed)
        failed = log_json(store, "attach", *id, NULL, recording_to_json(recording), err);
    return failed;
}

static int check_path(const char *path, struct err *err)
{
    return utf8_valid(path, strlen(path))
               ? ERR_OK
               : err_set(err, ERR_USAGE, "a recording's path is not UTF-8; rename file or folder");
}

int store_recording_add(struct store *store, const struct stored_recording *recording, int64_t *id,
                        struct err *err)
{
    int64_t made = 0;
    int failed = check_path(recording->path, err);
    if (!failed)
        failed = sql_begin(store, err);
    if (failed)
        return failed;
    failed = sql_end(store, recording_add_inside(store, recording, &made, err), err);
    forget(store);
    if (!failed)
        *id = made;
    return failed;
}

static int update_found(struct store *store, int64_t id, const char *path, int64_t modified_ns,
                        struct err *err)
{
    sqlite3_stmt *statement;
    int failed = sql_prepare(store, "UPDATE recordings SET path = ?, modified_ns = ? WHERE id = ?",
                             &statement, err);
    if (failed)
        return failed;
    (void)sqlite3_bind_text(statement, 1, path, -1, SQLITE_STATIC);
    (void)sqlite3_bind_int64(statement, 2, modified_ns);
    (void)sqlite3_bind_int64(statement, 3, id);
    return sql_finish(store, statement, err);
}

int store_recording_found(struct store *store, int64_t id, const char *path, int64_t modified_ns,
                          struct err *err)
{
    const struct stored_recording *known, *at = NULL;
    size_t count;
    int failed = store_recordings(store, &known, &count, err);
    for (size_t i = 0; i < count && !failed && !at; i++)
        at = known[i].id == id ? &known[i] : NULL;
    if (!failed && !at)
        failed = err_set(err, ERR_NOT_FOUND, "%s: no recording %lld", store->path, (long long)id);
    if (!failed)
        failed = check_path(path, err);
    if (!failed)
        failed = sql_begin(store, err);
    if (failed)
        return failed;
    bool moved = strcmp(at->path, path) != 0;
    json_t *before = moved ? json_pack("{s:s}", "path", at->path) : NULL;
    json_t *after = moved ? json_pack("{s:s}", "path", path) : NULL;
    failed = update_found(store, id, path, modified_ns, err);
    if (!failed && moved)
        failed = log_json(store, "found", id, before, after, err);
    failed = sql_end(store, failed, err);
    forget(store);
    return failed;
}
