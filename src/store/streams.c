/*
 * streams.c - files that a live session writes, until they are recordings, and recordings' clocks.
 */
#include <string.h>

#include "base/array.h"
#include "store/store_impl.h"

enum { SINCE_VERSION = 2 };

static int run_texts(struct store *store, const char *sql, const char *const *texts, int count,
                     struct err *err)
{
    sqlite3_stmt *statement;
    int failed = sql_prepare(store, sql, &statement, err);
    if (failed)
        return failed;
    for (int i = 0; i < count; i++)
        (void)sqlite3_bind_text(statement, 1 + i, texts[i], -1, SQLITE_STATIC);
    return sql_finish(store, statement, err);
}

int store_stream_keep(struct store *store, const struct stored_stream *stream, struct err *err)
{
    const char *texts[] = {stream->path, stream->session, stream->source, stream->clock};
    int failed = sql_begin(store, err);
    if (failed)
        return failed;
    failed = run_texts(store,
                       "INSERT INTO streams (path, session, source, clock) VALUES (?, ?, ?, ?) "
                       "ON CONFLICT (path) DO UPDATE SET clock = excluded.clock",
                       texts, 4, err);
    return sql_end(store, failed, err);
}

int store_stream_drop(struct store *store, const char *path, struct err *err)
{
    int failed = sql_begin(store, err);
    if (failed)
        return failed;
    failed = run_texts(store, "DELETE FROM streams WHERE path = ?", &path, 1, err);
    return sql_end(store, failed, err);
}

int store_streams(struct store *store, struct arena *arena, struct stored_stream **out,
                  size_t *count, struct err *err)
{
    enum { TEXTS = 4 };
    sqlite3_stmt *statement;
    int64_t rows = 0;
    int code = SQLITE_DONE, failed = ERR_OK;
    *count = 0;
    *out = NULL;
    if (store->version < SINCE_VERSION)
        return ERR_OK;
    failed =
        sql_integer(store, "SELECT count(*) FROM streams WHERE recording IS NULL", 0, &rows, err);
    if (failed || rows == 0)
        return failed;
    struct stored_stream *list = arena_alloc(arena, (size_t)rows, sizeof *list);
    if (!list)
        return err_memory(err, "streams");
    failed = sql_prepare(store,
                         "SELECT path, session, source, clock FROM streams WHERE recording IS NULL "
                         "ORDER BY rowid",
                         &statement, err);
    if (failed)
        return failed;
    while (!failed && (int64_t)*count < rows && (code = sqlite3_step(statement)) == SQLITE_ROW) {
        const char *texts[TEXTS];
        for (int i = 0; i < TEXTS; i++) {
            texts[i] = sql_column_text(statement, i, arena);
            if (!texts[i])
                failed = err_memory(err, "a stream");
        }
        if (!failed)
            list[(*count)++] = (struct stored_stream){texts[0], texts[1], texts[2], texts[3]};
    }
    if (!failed && code != SQLITE_DONE && code != SQLITE_ROW)
        failed = sql_error(store, code, err);
    (void)sqlite3_finalize(statement);
    *out = list;
    return failed;
}

/* ---- becoming a recording ---- */

static int put_clock(struct store *store, int64_t recording, const char *clock, struct err *err)
{
    sqlite3_stmt *statement;
    if (!*clock)
        return ERR_OK;
    int failed =
        sql_prepare(store, "INSERT INTO clocks (recording, clock) VALUES (?, ?)", &statement, err);
    if (failed)
        return failed;
    (void)sqlite3_bind_int64(statement, 1, recording);
    (void)sqlite3_bind_text(statement, 2, clock, -1, SQLITE_STATIC);
    failed = sql_finish(store, statement, err);
    json_t *after = json_pack("{s:s}", "clock", clock);
    struct history_entry entry = {"clock", recording, 0, NULL, after, "fitted while it streamed"};
    if (!failed)
        failed = after ? history_append(store, &entry, err) : err_memory(err, "a clock");
    json_decref(after);
    return failed;
}

static int tie_stream(struct store *store, const char *path, int64_t recording, struct err *err)
{
    sqlite3_stmt *statement;
    int failed =
        sql_prepare(store, "UPDATE streams SET recording = ? WHERE path = ?", &statement, err);
    if (failed)
        return failed;
    (void)sqlite3_bind_int64(statement, 1, recording);
    (void)sqlite3_bind_text(statement, 2, path, -1, SQLITE_STATIC);
    return sql_finish(store, statement, err);
}

int store_stream_attach(struct store *store, const struct stored_stream *stream,
                        const struct stored_recording *recording, int64_t *id, struct err *err)
{
    int64_t made = 0;
    int failed = sql_begin(store, err);
    if (failed)
        return failed;
    failed = recording_add_inside(store, recording, &made, err);
    if (!failed)
        failed = put_clock(store, made, stream->clock, err);
    if (!failed)
        failed = tie_stream(store, stream->path, made, err);
    failed = sql_end(store, failed, err);
    store->recordings_known = false;
    if (!failed)
        *id = made;
    return failed;
}

int store_stream_source(struct store *store, int64_t recording, struct arena *arena,
                        const char **out, struct err *err)
{
    sqlite3_stmt *statement;
    *out = "";
    if (store->version < SINCE_VERSION)
        return ERR_OK;
    int failed =
        sql_prepare(store, "SELECT source FROM streams WHERE recording = ?", &statement, err);
    if (failed)
        return failed;
    (void)sqlite3_bind_int64(statement, 1, recording);
    int code = sqlite3_step(statement);
    if (code == SQLITE_ROW) {
        *out = sql_column_text(statement, 0, arena);
        failed = *out ? ERR_OK : err_memory(err, "a stream");
    } else if (code != SQLITE_DONE) {
        failed = sql_error(store, code, err);
    }
    (void)sqlite3_finalize(statement);
    return failed;
}

/* ---- clocks ---- */

int clocks_each(struct store *store,
                int (*each)(int64_t recording, const char *clock, void *context, struct err *err),
                void *context, struct err *err)
{
    sqlite3_stmt *statement;
    int code = SQLITE_DONE;
    if (store->version < SINCE_VERSION)
        return ERR_OK;
    int failed = sql_prepare(store, "SELECT recording, clock FROM clocks ORDER BY recording",
                             &statement, err);
    if (failed)
        return failed;
    while (!failed && (code = sqlite3_step(statement)) == SQLITE_ROW)
        failed = each(sqlite3_column_int64(statement, 0),
                      (const char *)sqlite3_column_text(statement, 1), context, err);
    if (!failed && code != SQLITE_DONE)
        failed = sql_error(store, code, err);
    (void)sqlite3_finalize(statement);
    return failed;
}

struct wanted {
    int64_t recording;
    struct arena *arena;
    const char *clock;
};

static int take_wanted(int64_t recording, const char *clock, void *context, struct err *err)
{
    struct wanted *wanted = context;
    if (recording == wanted->recording)
        wanted->clock = arena_string(wanted->arena, clock ? clock : "");
    return wanted->clock ? ERR_OK : err_memory(err, "a clock");
}

int store_clock(struct store *store, int64_t recording, struct arena *arena, const char **out,
                struct err *err)
{
    struct wanted wanted = {recording, arena, ""};
    int failed = clocks_each(store, take_wanted, &wanted, err);
    if (!failed)
        *out = wanted.clock;
    return failed;
}
