/*
 * sql.c - the few things said to SQLite everywhere: prepare, finish, transactions, errors in words.
 */
#include <string.h>

#include "store/store_impl.h"

int sql_error(struct store *store, int code, struct err *err)
{
    const char *says = store->db ? sqlite3_errmsg(store->db) : sqlite3_errstr(code);
    switch (code & 0xFF) {
    case SQLITE_BUSY:
    case SQLITE_LOCKED:
        return err_set(err, ERR_CONFLICT,
                       "%s: in use by another program that is writing; try again when it is done",
                       store->path);
    case SQLITE_FULL:
        return err_set(err, ERR_IO, "%s: the disk is full; make room and try again", store->path);
    case SQLITE_READONLY:
        return err_set(err, ERR_READ_ONLY,
                       "%s: cannot be written: %s; check the disk and the "
                       "file's permissions",
                       store->path, says);
    case SQLITE_NOTADB:
        return err_set(err, ERR_FORMAT, "%s: not a case; make one with `incisura start`",
                       store->path);
    case SQLITE_CORRUPT:
        return err_set(err, ERR_FORMAT, "%s: damaged: %s; go back to a copy", store->path, says);
    case SQLITE_NOMEM:
        return err_memory(err, store->path);
    default:
        return err_set(err, ERR_IO, "%s: cannot read or write the case: %s", store->path, says);
    }
}

int sql_run(struct store *store, const char *sql, struct err *err)
{
    int code = sqlite3_exec(store->db, sql, NULL, NULL, NULL);
    return code == SQLITE_OK ? ERR_OK : sql_error(store, code, err);
}

int sql_prepare(struct store *store, const char *sql, sqlite3_stmt **out, struct err *err)
{
    int code = sqlite3_prepare_v2(store->db, sql, -1, out, NULL);
    return code == SQLITE_OK ? ERR_OK : sql_error(store, code, err);
}

int sql_finish(struct store *store, sqlite3_stmt *statement, struct err *err)
{
    int code = sqlite3_step(statement);
    int failed = code == SQLITE_DONE || code == SQLITE_ROW ? ERR_OK : sql_error(store, code, err);
    /* Repeats the step's error, which is told already. */
    (void)sqlite3_finalize(statement);
    return failed;
}

int sql_integer(struct store *store, const char *sql, int64_t missing, int64_t *out,
                struct err *err)
{
    sqlite3_stmt *statement;
    int failed = sql_prepare(store, sql, &statement, err);
    if (failed)
        return failed;
    int code = sqlite3_step(statement);
    if (code == SQLITE_ROW && sqlite3_column_type(statement, 0) != SQLITE_NULL)
        *out = sqlite3_column_int64(statement, 0);
    else if (code == SQLITE_ROW || code == SQLITE_DONE)
        *out = missing;
    else
        failed = sql_error(store, code, err);
    (void)sqlite3_finalize(statement);
    return failed;
}

void sql_bind_time(sqlite3_stmt *statement, int index, int64_t ns)
{
    /* Binding to a valid index of a fresh statement fails on memory alone; the step then says so.
     */
    if (ns == NS_NONE)
        (void)sqlite3_bind_null(statement, index);
    else
        (void)sqlite3_bind_int64(statement, index, ns);
}

int64_t sql_column_time(sqlite3_stmt *statement, int column)
{
    return sqlite3_column_type(statement, column) == SQLITE_NULL
               ? NS_NONE
               : sqlite3_column_int64(statement, column);
}

char *sql_column_text(sqlite3_stmt *statement, int column, struct arena *arena)
{
    const char *text = (const char *)sqlite3_column_text(statement, column);
    size_t length = (size_t)sqlite3_column_bytes(statement, column);
    return text ? arena_string_n(arena, text, length) : arena_string(arena, "");
}

int sql_begin(struct store *store, struct err *err)
{
    if (!store->writable)
        return err_set(err, ERR_READ_ONLY, "%s: opened for reading; nothing can be changed",
                       store->path);
    return sql_run(store, "BEGIN IMMEDIATE", err);
}

int sql_end(struct store *store, int failed, struct err *err)
{
    if (!failed)
        failed = sql_run(store, "COMMIT", err);
    /* SQLite may have rolled back by itself; asking again is harmless. */
    if (failed && !sqlite3_get_autocommit(store->db))
        (void)sqlite3_exec(store->db, "ROLLBACK", NULL, NULL, NULL);
    return failed;
}
