/*
 * sessions.c - live sessions: who stamps, on which clock, and whether that process still runs.
 * Their changes of marks are in live_change.c.
 */
#include <stdio.h>
#include <string.h>
#include <time.h>

#include "base/machine.h"
#include "store/store_impl.h"

#define SESSION_COLUMNS                                                 \
    "id, uid, host, boot_id, pid, process_start, rater, begun_utc_ns, " \
    "case_minus_boottime_ns, tie_error_ns, ended_utc_ns, machine"

json_t *session_to_json(const struct live_session *session)
{
    return json_pack(
        "{s:s, s:s, s:s, s:s, s:I, s:I, s:s, s:I, s:I, s:I, s:o}", "uid", session->uid, "host",
        session->host, "machine", session->machine, "boot_id", session->boot_id, "pid",
        (json_int_t)session->pid, "process_start", (json_int_t)session->process_start, "rater",
        session->rater, "begun_utc_ns", (json_int_t)session->begun_utc_ns, "case_minus_boottime_ns",
        (json_int_t)session->case_minus_boottime_ns, "tie_error_ns",
        (json_int_t)session->tie_error_ns, "ended_utc_ns",
        session->ended_utc_ns == NS_NONE ? json_null() : json_integer(session->ended_utc_ns));
}

bool live_session_alive(const struct live_session *session)
{
    char machine[MACHINE_ID_SIZE], boot[BOOT_ID_SIZE];
    machine_id(machine);
    boot_id(boot);
    if (session->ended_utc_ns != NS_NONE)
        return false;
    if (strcmp(session->machine, machine) != 0)
        return true;
    return strcmp(session->boot_id, boot) == 0 &&
           process_start_ticks(session->pid) == session->process_start;
}

static void take_text(sqlite3_stmt *statement, int column, char *out, size_t size)
{
    const char *text = (const char *)sqlite3_column_text(statement, column);
    (void)snprintf(out, size, "%s", text ? text : "");
}

static struct live_session take_session(sqlite3_stmt *statement)
{
    struct live_session out = {
        .pid = sqlite3_column_int64(statement, 4),
        .process_start = sqlite3_column_int64(statement, 5),
        .begun_utc_ns = sqlite3_column_int64(statement, 7),
        .epoch_civil_ns = NS_NONE,
        .case_minus_boottime_ns = sqlite3_column_int64(statement, 8),
        .tie_error_ns = sqlite3_column_int64(statement, 9),
        .ended_utc_ns = sql_column_time(statement, 10),
    };
    take_text(statement, 1, out.uid, sizeof out.uid);
    take_text(statement, 2, out.host, sizeof out.host);
    take_text(statement, 3, out.boot_id, sizeof out.boot_id);
    take_text(statement, 6, out.rater, sizeof out.rater);
    take_text(statement, 11, out.machine, sizeof out.machine);
    return out;
}

int sessions_each(struct store *store,
                  int (*each)(int64_t id, const struct live_session *session, void *context,
                              struct err *err),
                  void *context, struct err *err)
{
    enum { SINCE_VERSION = 2 };
    sqlite3_stmt *statement;
    int code = SQLITE_DONE;
    if (store->version < SINCE_VERSION)
        return ERR_OK;
    int failed =
        sql_prepare(store, "SELECT " SESSION_COLUMNS " FROM sessions ORDER BY id", &statement, err);
    if (failed)
        return failed;
    while (!failed && (code = sqlite3_step(statement)) == SQLITE_ROW) {
        struct live_session session = take_session(statement);
        failed = each(sqlite3_column_int64(statement, 0), &session, context, err);
    }
    if (!failed && code != SQLITE_DONE)
        failed = sql_error(store, code, err);
    (void)sqlite3_finalize(statement);
    return failed;
}

/* ---- looking through them ---- */

struct search {
    const char *uid; /* of the session asked for */
    int64_t id;      /* of the one found; 0 = none */
    bool any;
    struct live_session found;
};

static int keep_last(int64_t id, const struct live_session *session, void *context, struct err *err)
{
    struct search *search = context;
    (void)err;
    search->id = id;
    search->found = *session;
    return ERR_OK;
}

int store_session_last(struct store *store, struct live_session *out, bool *any, struct err *err)
{
    struct search search = {0};
    int failed = sessions_each(store, keep_last, &search, err);
    if (failed)
        return failed;
    *any = search.id != 0;
    if (*any)
        *out = search.found;
    return ERR_OK;
}

static int keep_uid(int64_t id, const struct live_session *session, void *context, struct err *err)
{
    struct search *search = context;
    (void)err;
    if (strcmp(session->uid, search->uid) == 0) {
        search->id = id;
        search->found = *session;
    }
    return ERR_OK;
}

int store_session_runs(struct store *store, const char *uid, bool *out, struct err *err)
{
    struct search search = {.uid = uid};
    int failed = sessions_each(store, keep_uid, &search, err);
    if (!failed)
        *out = search.id != 0 && live_session_alive(&search.found);
    return failed;
}

/* ---- ending ---- */

static int end_inside(struct store *store, int64_t id, const char *why, struct err *err)
{
    sqlite3_stmt *statement;
    int64_t now = utc_now_ns();
    int failed =
        sql_prepare(store, "UPDATE sessions SET ended_utc_ns = ? WHERE id = ?", &statement, err);
    if (failed)
        return failed;
    (void)sqlite3_bind_int64(statement, 1, now);
    (void)sqlite3_bind_int64(statement, 2, id);
    failed = sql_finish(store, statement, err);
    json_t *after = json_pack("{s:I}", "ended_utc_ns", (json_int_t)now);
    struct history_entry entry = {"session-end", id, 0, NULL, after, why};
    if (!failed)
        failed = after ? history_append(store, &entry, err) : err_memory(err, "a session");
    json_decref(after);
    return failed;
}

int store_session_end(struct store *store, const char *uid, struct err *err)
{
    struct search search = {.uid = uid};
    int failed = sql_begin(store, err);
    if (failed)
        return failed;
    failed = sessions_each(store, keep_uid, &search, err);
    if (!failed && search.id != 0 && search.found.ended_utc_ns == NS_NONE)
        failed = end_inside(store, search.id, "", err);
    return sql_end(store, failed, err);
}

/* ---- beginning ---- */

static int refuse_running(struct store *store, const struct live_session *running, struct err *err)
{
    char when[TIME_TEXT_SIZE], machine[MACHINE_ID_SIZE];
    machine_id(machine);
    time_t seconds = (time_t)(running->begun_utc_ns / NS_PER_S);
    struct tm local;
    if (!localtime_r(&seconds, &local) || !strftime(when, sizeof when, "%Y-%m-%d %H:%M:%S", &local))
        (void)snprintf(when, sizeof when, "earlier");
    bool here = strcmp(running->machine, machine) == 0;
    return err_set(err, ERR_CONFLICT,
                   "%s: a live session of %s runs already, since %s on %s (process %lld); %s",
                   store->path, *running->rater ? running->rater : "somebody", when, running->host,
                   (long long)running->pid,
                   here ? "leave that one first"
                        : "leave that one first, or --take-over when it is gone for good");
}

struct others {
    struct store *store;
    const char *uid;
    bool take_over;
};

/* One that runs is in the way; one whose process is gone is ended. */
static int pass_other(int64_t id, const struct live_session *other, void *context, struct err *err)
{
    const struct others *others = context;
    if (other->ended_utc_ns != NS_NONE || strcmp(other->uid, others->uid) == 0)
        return ERR_OK;
    if (live_session_alive(other) && !others->take_over)
        return refuse_running(others->store, other, err);
    return end_inside(others->store, id, "ended without closing; found at the next start", err);
}

static int insert_session(struct store *store, const struct live_session *session, struct err *err)
{
    sqlite3_stmt *statement;
    int failed = sql_prepare(store,
                             "INSERT INTO sessions (uid, host, boot_id, pid, process_start, rater, "
                             "begun_utc_ns, case_minus_boottime_ns, tie_error_ns, machine) "
                             "VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
                             &statement, err);
    if (failed)
        return failed;
    const char *texts[] = {session->uid, session->host, session->boot_id};
    for (int i = 0; i < 3; i++)
        (void)sqlite3_bind_text(statement, 1 + i, texts[i], -1, SQLITE_STATIC);
    (void)sqlite3_bind_int64(statement, 4, session->pid);
    (void)sqlite3_bind_int64(statement, 5, session->process_start);
    (void)sqlite3_bind_text(statement, 6, session->rater, -1, SQLITE_STATIC);
    (void)sqlite3_bind_int64(statement, 7, session->begun_utc_ns);
    (void)sqlite3_bind_int64(statement, 8, session->case_minus_boottime_ns);
    (void)sqlite3_bind_int64(statement, 9, session->tie_error_ns);
    (void)sqlite3_bind_text(statement, 10, session->machine, -1, SQLITE_STATIC);
    return sql_finish(store, statement, err);
}

/* The epoch that the session counts from becomes the case's, unless it has one by now. */
static int fix_epoch(struct store *store, const struct live_session *session, struct err *err)
{
    int64_t known;
    int failed = sql_integer(store, "SELECT epoch_civil_ns FROM case_info WHERE id = 1", NS_NONE,
                             &known, err);
    if (!failed && known == NS_NONE && session->epoch_civil_ns != NS_NONE)
        failed = epoch_fix_inside(store, session->epoch_civil_ns, err);
    return failed;
}

int session_begin_inside(struct store *store, const struct live_session *session, bool take_over,
                         struct err *err)
{
    struct search search = {.uid = session->uid};
    struct others others = {store, session->uid, take_over};
    int failed = sessions_each(store, keep_uid, &search, err);
    if (failed || search.id != 0)
        return failed;
    /* One that is brought in afterwards, its process gone, is in nobody's way and nobody in its. */
    if (live_session_alive(session))
        failed = sessions_each(store, pass_other, &others, err);
    if (!failed)
        failed = fix_epoch(store, session, err);
    if (!failed)
        failed = insert_session(store, session, err);
    if (failed)
        return failed;
    struct live_session running = *session;
    running.ended_utc_ns = NS_NONE;
    json_t *after = session_to_json(&running);
    struct history_entry entry = {
        "session-begin", sqlite3_last_insert_rowid(store->db), 0, NULL, after, ""};
    failed = after ? history_append(store, &entry, err) : err_memory(err, "a session");
    json_decref(after);
    return failed;
}

int store_session_begin(struct store *store, const struct live_session *session, bool take_over,
                        struct err *err)
{
    int failed = sql_begin(store, err);
    if (!failed)
        failed = sql_end(store, session_begin_inside(store, session, take_over, err), err);
    return failed ? failed : header_reload(store, err);
}
