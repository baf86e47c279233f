/*
 * live_change.c - a session's changes of marks: each is done once, however often it is tried.
 */
#include <string.h>

#include "store/store_impl.h"

/* The mark that a number of a session was about; 0 when it is not done yet. */
static int find_done(struct store *store, const char *session, int64_t number, int64_t *mark,
                     struct err *err)
{
    sqlite3_stmt *statement;
    int failed =
        sql_prepare(store, "SELECT mark FROM session_changes WHERE session = ? AND number = ?",
                    &statement, err);
    if (failed)
        return failed;
    (void)sqlite3_bind_text(statement, 1, session, -1, SQLITE_STATIC);
    (void)sqlite3_bind_int64(statement, 2, number);
    int code = sqlite3_step(statement);
    if (code == SQLITE_ROW)
        *mark = sqlite3_column_int64(statement, 0);
    else if (code == SQLITE_DONE)
        *mark = 0;
    else
        failed = sql_error(store, code, err);
    (void)sqlite3_finalize(statement);
    return failed;
}

static int note_done(struct store *store, const char *session, int64_t number, int64_t mark,
                     struct err *err)
{
    sqlite3_stmt *statement;
    int failed =
        sql_prepare(store, "INSERT INTO session_changes (session, number, mark) VALUES (?, ?, ?)",
                    &statement, err);
    if (failed)
        return failed;
    (void)sqlite3_bind_text(statement, 1, session, -1, SQLITE_STATIC);
    (void)sqlite3_bind_int64(statement, 2, number);
    (void)sqlite3_bind_int64(statement, 3, mark);
    return sql_finish(store, statement, err);
}

/* The mark on the case's time line: the same unless the case got another start before the session
 * could be written. */
static int shift(struct store *store, const struct live_session *session, struct mark *mark,
                 struct err *err)
{
    int64_t epoch;
    int failed = sql_integer(store, "SELECT epoch_civil_ns FROM case_info WHERE id = 1",
                             session->epoch_civil_ns, &epoch, err);
    if (failed || epoch == NS_NONE || session->epoch_civil_ns == NS_NONE)
        return failed;
    mark->onset_ns += session->epoch_civil_ns - epoch;
    if (mark->until_ns != NS_NONE)
        mark->until_ns += session->epoch_civil_ns - epoch;
    return ERR_OK;
}

static int do_change(struct store *store, const struct live_session *session,
                     const struct live_change *change, int64_t *id, struct err *err)
{
    struct mark mark = change->mark;
    int64_t step, about = change->of_id;
    int failed = shift(store, session, &mark, err);
    if (!failed && change->kind == LIVE_ADD) {
        failed = history_new_step(store, &step, err);
        return failed ? failed : mark_add_inside(store, &mark, step, change->why, id, err);
    }
    if (!failed && change->of_number > 0)
        failed = find_done(store, session->uid, change->of_number, &about, err);
    if (!failed && about == 0)
        failed = err_set(err, ERR_NOT_FOUND, "%s: change %lld is about a mark that is not there",
                         store->path, (long long)change->number);
    mark.id = about;
    if (!failed)
        failed = mark_change_inside(store, &mark, change->why, err);
    if (!failed)
        *id = about;
    return failed;
}

static int change_inside(struct store *store, const struct live_session *session,
                         const struct live_change *change, int64_t *id, struct err *err)
{
    int failed = session_begin_inside(store, session, false, err);
    if (!failed)
        failed = find_done(store, session->uid, change->number, id, err);
    if (failed || *id != 0)
        return failed;
    failed = do_change(store, session, change, id, err);
    if (!failed)
        failed = note_done(store, session->uid, change->number, *id, err);
    return failed;
}

int store_live_change(struct store *store, const struct live_session *session,
                      const struct live_change *change, int64_t *id, struct err *err)
{
    int64_t made = 0;
    int failed = sql_begin(store, err);
    if (failed)
        return failed;
    failed = sql_end(store, change_inside(store, session, change, &made, err), err);
    marks_forget(store);
    if (!failed)
        *id = made;
    return failed;
}

bool store_in_place(struct store *store)
{
    int moved = 0;
    return sqlite3_file_control(store->db, "main", SQLITE_FCNTL_HAS_MOVED, &moved) == SQLITE_OK &&
           !moved;
}

int store_case_id(struct store *store, char out[CASE_ID_SIZE], struct err *err)
{
    sqlite3_stmt *statement;
    char text[DIGEST_TEXT_SIZE] = "";
    int failed = sql_prepare(store, "SELECT digest FROM history WHERE seq = 1", &statement, err);
    if (failed)
        return failed;
    int code = sqlite3_step(statement);
    if (code == SQLITE_ROW && sqlite3_column_bytes(statement, 0) == DIGEST_SIZE)
        digest_text(sqlite3_column_blob(statement, 0), text);
    else if (code == SQLITE_ROW || code == SQLITE_DONE)
        failed = err_set(err, ERR_FORMAT, "%s: its history has no first row", store->path);
    else
        failed = sql_error(store, code, err);
    (void)sqlite3_finalize(statement);
    if (!failed) {
        memcpy(out, text, CASE_ID_SIZE - 1);
        out[CASE_ID_SIZE - 1] = '\0';
    }
    return failed;
}
