/*
 * marks.c - adding, changing and listing marks, each with the history row that explains it.
 */
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "base/str.h"
#include "store/store_impl.h"

static const char *const state_names[] = {"incomplete", "marked", "confirmed", "rejected"};
static const char *const source_names[] = {"live", "review", "command", "import"};

const char *mark_state_name(enum mark_state state)
{
    return (unsigned)state < 4 ? state_names[state] : "";
}

bool mark_state_from_name(const char *name, enum mark_state *out)
{
    for (int i = 0; i < 4; i++) {
        if (ascii_equal(name, state_names[i])) {
            *out = (enum mark_state)i;
            return true;
        }
    }
    return false;
}

const char *mark_source_name(enum mark_source source)
{
    return (unsigned)source < 4 ? source_names[source] : "";
}

static enum mark_source source_from_name(const char *name)
{
    int at = 0;
    while (at < 3 && strcmp(name, source_names[at]) != 0)
        at++;
    return (enum mark_source)at;
}

#define MARK_COLUMNS                                                                           \
    "id, code, onset_ns, until_ns, value, unit, route, note, state, source, rater, error_ns, " \
    "stamp_clock, stamp_ns, stamp_utc_ns"

static int take_mark(sqlite3_stmt *statement, struct arena *arena, struct mark *out,
                     struct err *err)
{
    enum { TEXTS = 8 };
    static const int columns[TEXTS] = {1, 5, 6, 7, 8, 9, 10, 12};
    char *texts[TEXTS];
    for (int i = 0; i < TEXTS; i++) {
        texts[i] = sql_column_text(statement, columns[i], arena);
        if (!texts[i])
            return err_memory(err, "a mark");
    }
    *out = (struct mark){
        .id = sqlite3_column_int64(statement, 0),
        .code = texts[0],
        .onset_ns = sqlite3_column_int64(statement, 2),
        .until_ns = sql_column_time(statement, 3),
        .has_value = sqlite3_column_type(statement, 4) != SQLITE_NULL,
        .value = sqlite3_column_double(statement, 4),
        .unit = texts[1],
        .route = texts[2],
        .note = texts[3],
        .source = source_from_name(texts[5]),
        .rater = texts[6],
        .error_ns = sqlite3_column_int64(statement, 11),
        .stamp_clock = texts[7],
        .stamp_ns = sql_column_time(statement, 13),
        .stamp_utc_ns = sql_column_time(statement, 14),
    };
    /* The table's CHECK allows the four names alone. */
    if (!mark_state_from_name(texts[4], &out->state))
        out->state = MARK_INCOMPLETE;
    return ERR_OK;
}

int mark_load(struct store *store, int64_t id, struct arena *arena, struct mark *out,
              struct err *err)
{
    sqlite3_stmt *statement;
    int failed =
        sql_prepare(store, "SELECT " MARK_COLUMNS " FROM marks WHERE id = ?", &statement, err);
    if (failed)
        return failed;
    (void)sqlite3_bind_int64(statement, 1, id);
    int code = sqlite3_step(statement);
    if (code == SQLITE_ROW)
        failed = take_mark(statement, arena, out, err);
    else if (code == SQLITE_DONE)
        failed = err_set(err, ERR_NOT_FOUND, "%s: no mark %lld", store->path, (long long)id);
    else
        failed = sql_error(store, code, err);
    (void)sqlite3_finalize(statement);
    return failed;
}

void marks_forget(struct store *store)
{
    store->marks_known = false;
    store->mark_count = 0;
    arena_free(&store->mark_arena);
}

static int list_marks(struct store *store, struct err *err)
{
    sqlite3_stmt *statement;
    int code = SQLITE_DONE;
    int failed = sql_prepare(store, "SELECT " MARK_COLUMNS " FROM marks ORDER BY onset_ns, id",
                             &statement, err);
    if (failed)
        return failed;
    while (!failed && (code = sqlite3_step(statement)) == SQLITE_ROW) {
        failed = array_reserve((void **)&store->marks, &store->mark_room, store->mark_count + 1,
                               sizeof *store->marks, err);
        if (!failed)
            failed =
                take_mark(statement, &store->mark_arena, &store->marks[store->mark_count], err);
        store->mark_count += !failed;
    }
    if (!failed && code != SQLITE_DONE)
        failed = sql_error(store, code, err);
    (void)sqlite3_finalize(statement);
    return failed;
}

int store_marks(struct store *store, const struct mark **out, size_t *count, struct err *err)
{
    if (!store->marks_known) {
        marks_forget(store);
        int failed = list_marks(store, err);
        if (failed)
            return failed;
        store->marks_known = true;
    }
    *out = store->marks;
    *count = store->mark_count;
    return ERR_OK;
}

int marks_copy(const struct mark *marks, size_t count, struct arena *arena, struct mark **out,
               struct err *err)
{
    struct mark *copy = arena_alloc(arena, count + 1, sizeof *copy);
    if (!copy)
        return err_memory(err, "marks");
    for (size_t i = 0; i < count; i++) {
        struct mark *to = &copy[i];
        *to = marks[i];
        const char **texts[] = {&to->code, &to->unit,  &to->route,
                                &to->note, &to->rater, &to->stamp_clock};
        for (size_t k = 0; k < sizeof texts / sizeof *texts; k++) {
            *texts[k] = arena_string(arena, *texts[k] ? *texts[k] : "");
            if (!*texts[k])
                return err_memory(err, "marks");
        }
    }
    *out = copy;
    return ERR_OK;
}

/* Binds the member `key` of `fields` as `:key`, when the statement has such a parameter. */
static void bind_json(sqlite3_stmt *statement, const char *key, const json_t *value)
{
    char name[32] = ":";
    (void)strncat(name, key, sizeof name - 2);
    int index = sqlite3_bind_parameter_index(statement, name);
    if (index == 0)
        return;
    switch (json_typeof(value)) {
    case JSON_STRING:
        (void)sqlite3_bind_text(statement, index, json_string_value(value), -1, SQLITE_STATIC);
        break;
    case JSON_INTEGER:
        (void)sqlite3_bind_int64(statement, index, json_integer_value(value));
        break;
    case JSON_REAL:
        (void)sqlite3_bind_double(statement, index, json_real_value(value));
        break;
    default:
        (void)sqlite3_bind_null(statement, index);
    }
}

static int run_with_fields(struct store *store, const char *sql, int64_t id, const json_t *fields,
                           struct err *err)
{
    sqlite3_stmt *statement;
    const char *key;
    json_t *value;
    int failed = sql_prepare(store, sql, &statement, err);
    if (failed)
        return failed;
    json_object_foreach((json_t *)(uintptr_t)fields, key, value)
    {
        bind_json(statement, key, value);
    }
    if (id > 0)
        (void)sqlite3_bind_int64(statement, sqlite3_bind_parameter_index(statement, ":id"), id);
    return sql_finish(store, statement, err);
}

int mark_write(struct store *store, int64_t id, const json_t *fields, struct err *err)
{
    struct str sql = {0};
    const char *key;
    json_t *value;
    size_t count = 0;
    json_object_foreach((json_t *)(uintptr_t)fields, key, value)
    {
        str_putf(&sql, "%s%s = :%s", count++ ? ", " : "UPDATE marks SET ", key, key);
    }
    str_put(&sql, " WHERE id = :id");
    int failed = ERR_OK;
    if (str_failed(&sql))
        failed = err_memory(err, "a change");
    else if (count > 0)
        failed = run_with_fields(store, str_text(&sql), id, fields, err);
    str_free(&sql);
    return failed;
}

static int check_mark(const struct mark *mark, struct err *err)
{
    const char *texts[] = {mark->code, mark->unit,  mark->route,
                           mark->note, mark->rater, mark->stamp_clock};
    for (size_t i = 0; i < sizeof texts / sizeof *texts; i++) {
        if (texts[i] && !utf8_valid(texts[i], strlen(texts[i])))
            return err_set(err, ERR_USAGE, "a mark's text is not UTF-8");
    }
    if (!mark->code || !*mark->code)
        return err_set(err, ERR_USAGE, "a mark needs a code");
    if (mark->onset_ns == NS_NONE)
        return err_set(err, ERR_USAGE, "a mark needs a time");
    if (mark->has_value && !isfinite(mark->value))
        return err_set(err, ERR_USAGE, "a mark's value is not a finite number");
    return ERR_OK;
}

int mark_add_inside(struct store *store, const struct mark *mark, int64_t step, const char *why,
                    int64_t *id, struct err *err)
{
    struct mark full = *mark;
    if (!full.rater || !*full.rater)
        full.rater = store->rater;
    if (full.stamp_utc_ns == NS_NONE)
        full.stamp_utc_ns = utc_now_ns();
    int failed = check_mark(&full, err);
    if (failed)
        return failed;
    json_t *fields = mark_to_json(&full);
    if (!fields)
        return err_memory(err, "a mark");
    failed = run_with_fields(
        store,
        "INSERT INTO marks (code, onset_ns, until_ns, value, unit, route, note, state, source, "
        "rater, error_ns, stamp_clock, stamp_ns, stamp_utc_ns) VALUES (:code, :onset_ns, "
        ":until_ns, :value, :unit, :route, :note, :state, :source, :rater, :error_ns, "
        ":stamp_clock, :stamp_ns, :stamp_utc_ns)",
        0, fields, err);
    if (!failed) {
        *id = sqlite3_last_insert_rowid(store->db);
        struct history_entry entry = {"mark-add", *id, step, NULL, fields, why};
        failed = history_append(store, &entry, err);
    }
    json_decref(fields);
    return failed;
}

int store_mark_add(struct store *store, const struct mark *mark, const char *why, int64_t *id,
                   struct err *err)
{
    int64_t step, made = 0;
    int failed = sql_begin(store, err);
    if (failed)
        return failed;
    failed = history_new_step(store, &step, err);
    if (!failed)
        failed = mark_add_inside(store, mark, step, why, &made, err);
    failed = sql_end(store, failed, err);
    marks_forget(store);
    if (!failed)
        *id = made;
    return failed;
}

int store_mark_add_all(struct store *store, const struct mark *marks, size_t count, const char *why,
                       struct err *err)
{
    int64_t step, id;
    int failed = sql_begin(store, err);
    if (failed)
        return failed;
    failed = history_new_step(store, &step, err);
    for (size_t i = 0; i < count && !failed; i++)
        failed = mark_add_inside(store, &marks[i], step, why, &id, err);
    failed = sql_end(store, failed, err);
    marks_forget(store);
    return failed;
}

int mark_change_inside(struct store *store, const struct mark *mark, const char *why,
                       struct err *err)
{
    struct arena arena = {0};
    struct mark old, new = *mark;
    json_t *from = NULL, *to = NULL, *before = NULL, *after = NULL;
    int64_t step;
    int failed = mark_load(store, mark->id, &arena, &old, err);
    if (!failed) {
        new.source = old.source;
        new.rater = old.rater;
        new.stamp_clock = old.stamp_clock;
        new.stamp_ns = old.stamp_ns;
        new.stamp_utc_ns = old.stamp_utc_ns;
        failed = check_mark(&new, err);
    }
    if (!failed) {
        from = mark_to_json(&old);
        to = mark_to_json(&new);
        failed = from && to ? json_difference(from, to, &before, &after, err)
                            : err_memory(err, "a change");
    }
    if (!failed && json_object_size(after) > 0) {
        failed = history_new_step(store, &step, err);
        if (!failed)
            failed = mark_write(store, mark->id, after, err);
        struct history_entry entry = {"mark-change", mark->id, step, before, after, why};
        if (!failed)
            failed = history_append(store, &entry, err);
    }
    json_decref(from);
    json_decref(to);
    json_decref(before);
    json_decref(after);
    arena_free(&arena);
    return failed;
}

int store_mark_change(struct store *store, const struct mark *mark, const char *why,
                      struct err *err)
{
    int failed = sql_begin(store, err);
    if (failed)
        return failed;
    failed = sql_end(store, mark_change_inside(store, mark, why, err), err);
    marks_forget(store);
    return failed;
}
