/*
 * undo.c - undo and redo as new history rows.
 *
 * A step is all rows that share a step number. It is undone when the last of them is an "undo"
 * row. Undo takes the highest step that is not undone; redo the lowest undone one after which no
 * new step was begun. Nothing is kept in memory: the history says it all, after a restart too.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "store/store_impl.h"

static const char undo_target[] =
    "SELECT max(step) FROM (SELECT step, action, max(seq) FROM history WHERE step > 0 "
    "GROUP BY step) WHERE action <> 'undo'";

/* Undone steps that were undone after the newest step was begun. Steps are numbered as they begin,
 * so the newest one stands for all. */
static const char redo_target[] =
    "SELECT min(step) FROM (SELECT step, action, max(seq) AS seq FROM history WHERE step > 0 "
    "GROUP BY step) WHERE action = 'undo' AND seq > (SELECT min(seq) FROM history WHERE step = "
    "(SELECT max(step) FROM history) AND step > 0)";

/* What a mark goes back to, from the original row of the step. Undoing an "add" rejects. */
static json_t *target_fields(bool undo, const char *action, const char *before, const char *after)
{
    if (strcmp(action, "mark-add") != 0)
        return json_loads(undo ? before : after, 0, NULL);
    if (undo)
        return json_pack("{s:s}", "state", mark_state_name(MARK_REJECTED));
    json_t *all = json_loads(after, 0, NULL);
    json_t *fields = json_object();
    json_t *state = json_object_get(all, "state");
    if (fields && state && json_object_set(fields, "state", state) == 0) {
        json_decref(all);
        return fields;
    }
    json_decref(all);
    json_decref(fields);
    return NULL;
}

/* Puts the fields into the mark, with a row that keeps what they were. */
static int apply(struct store *store, bool undo, int64_t id, int64_t step, json_t *fields,
                 struct err *err)
{
    struct arena arena = {0};
    struct mark mark;
    json_t *now = NULL, *before = NULL, *after = NULL;
    int failed = mark_load(store, id, &arena, &mark, err);
    if (!failed) {
        now = mark_to_json(&mark);
        failed =
            now ? json_difference(now, fields, &before, &after, err) : err_memory(err, "an undo");
    }
    if (!failed)
        failed = mark_write(store, id, after, err);
    struct history_entry entry = {undo ? "undo" : "redo", id, step, before, after, ""};
    if (!failed)
        failed = history_append(store, &entry, err);
    json_decref(now);
    json_decref(before);
    json_decref(after);
    arena_free(&arena);
    return failed;
}

static void describe(const char *action, int64_t id, json_t *fields, size_t count, char *what,
                     size_t size)
{
    const char *code = json_string_value(json_object_get(fields, "code"));
    const char *verb = strcmp(action, "mark-add") == 0 ? "add" : "change";
    if (!what)
        return;
    if (count > 1)
        (void)snprintf(what, size, "%s %zu marks", verb, count);
    else
        (void)snprintf(what, size, "%s %s (mark %lld)", verb, code ? code : "mark", (long long)id);
}

struct original {
    int64_t id;
    char *action, *before, *after;
};

/* The rows that began the step, newest first for undo, oldest first for redo. Read whole before
 * anything is written, as the rows that are written belong to the same step. */
static int load_originals(struct store *store, int64_t step, bool undo, struct arena *arena,
                          struct original **out, size_t *count, struct err *err)
{
    sqlite3_stmt *statement;
    const char *sql = undo ? "SELECT object, action, before, after, count(*) OVER () FROM history "
                             "WHERE step = ? AND action IN ('mark-add', 'mark-change') "
                             "ORDER BY seq DESC"
                           : "SELECT object, action, before, after, count(*) OVER () FROM history "
                             "WHERE step = ? AND action IN ('mark-add', 'mark-change') "
                             "ORDER BY seq";
    int failed = sql_prepare(store, sql, &statement, err), code = SQLITE_DONE;
    if (failed)
        return failed;
    (void)sqlite3_bind_int64(statement, 1, step);
    *count = 0;
    *out = NULL;
    while (!failed && (code = sqlite3_step(statement)) == SQLITE_ROW) {
        size_t all = (size_t)sqlite3_column_int64(statement, 4);
        if (!*out)
            *out = arena_alloc(arena, all, sizeof **out);
        struct original row = {
            sqlite3_column_int64(statement, 0), sql_column_text(statement, 1, arena),
            sql_column_text(statement, 2, arena), sql_column_text(statement, 3, arena)};
        if (!*out || !row.action || !row.before || !row.after)
            failed = err_memory(err, "a step");
        else
            (*out)[(*count)++] = row;
    }
    if (!failed && code != SQLITE_DONE)
        failed = sql_error(store, code, err);
    (void)sqlite3_finalize(statement);
    return failed;
}

static int apply_step(struct store *store, bool undo, int64_t step, char *what, size_t size,
                      struct err *err)
{
    struct arena arena = {0};
    struct original *rows;
    size_t count;
    int failed = load_originals(store, step, undo, &arena, &rows, &count, err);
    for (size_t i = 0; i < count && !failed; i++) {
        json_t *fields = target_fields(undo, rows[i].action, rows[i].before, rows[i].after);
        json_t *said = json_loads(rows[i].after, 0, NULL);
        failed = fields ? apply(store, undo, rows[i].id, step, fields, err)
                        : err_set(err, ERR_CONFLICT,
                                  "%s: the history of mark %lld cannot be read; `history --verify` "
                                  "says more",
                                  store->path, (long long)rows[i].id);
        if (!failed && i == 0)
            describe(rows[i].action, rows[i].id, said, count, what, size);
        json_decref(fields);
        json_decref(said);
    }
    arena_free(&arena);
    return failed;
}

static int go(struct store *store, bool undo, bool *done, char *what, size_t size, struct err *err)
{
    int64_t step = 0;
    *done = false;
    int failed = sql_begin(store, err);
    if (failed)
        return failed;
    failed = sql_integer(store, undo ? undo_target : redo_target, 0, &step, err);
    if (!failed && step > 0)
        failed = apply_step(store, undo, step, what, size, err);
    failed = sql_end(store, failed, err);
    marks_forget(store);
    *done = !failed && step > 0;
    return failed;
}

int store_undo(struct store *store, bool *done, char *what, size_t size, struct err *err)
{
    return go(store, true, done, what, size, err);
}

int store_redo(struct store *store, bool *done, char *what, size_t size, struct err *err)
{
    return go(store, false, done, what, size, err);
}
