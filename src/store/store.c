/*
 * store.c - creating, opening and closing a case's file; its header. Marks, recordings and history
 * are in files of their own.
 */
#include "store/store.h"

#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "base/str.h"
#include "store/migrations.h"
#include "store/store_impl.h"

enum { BUSY_MS = 2000 };

json_t *header_to_json(const struct case_header *header)
{
    uint8_t digest[DIGEST_SIZE];
    char text[DIGEST_TEXT_SIZE];
    digest_bytes(header->codebook_text, header->codebook_size, digest);
    digest_text(digest, text);
    return json_pack("{s:s, s:s, s:s, s:s, s:i, s:o}", "subject", header->subject, "procedure",
                     header->procedure, "rater", header->rater, "codebook_digest", text,
                     "utc_offset_s", header->utc_offset_s, "epoch_civil_ns",
                     header->epoch_civil_ns == NS_NONE ? json_null()
                                                       : json_integer(header->epoch_civil_ns));
}

void store_close(struct store *store)
{
    if (!store)
        return;
    /* Closing cannot fail: every statement is finalised where it is made. */
    (void)sqlite3_close_v2(store->db);
    arena_free(&store->header_arena);
    arena_free(&store->mark_arena);
    arena_free(&store->recording_arena);
    free(store->marks);
    free(store->recordings);
    free(store->path);
    free(store->rater);
    free(store);
}

static struct store *store_new(const char *path)
{
    struct store *made = calloc(1, sizeof *made);
    if (!made)
        return NULL;
    made->path = strdup(path);
    made->rater = strdup("");
    if (made->path && made->rater)
        return made;
    store_close(made);
    return NULL;
}

/* "file:" URI of a path, for opening a file on a disk that cannot be written at all. */
static int immutable_uri(const char *path, struct str *out)
{
    str_put(out, "file:");
    for (const char *c = path; *c; c++) {
        if (*c == '?' || *c == '#' || *c == '%')
            str_putf(out, "%%%02X", (unsigned)(unsigned char)*c);
        else
            str_putc(out, *c);
    }
    str_put(out, "?immutable=1");
    return str_failed(out);
}

/* Can the schema be read? That is when SQLite looks at the file. */
static int probe(struct store *store, struct err *err)
{
    int64_t tables;
    return sql_integer(store, "SELECT count(*) FROM sqlite_schema", 0, &tables, err);
}

static int open_as(struct store *store, const char *name, int flags, struct err *err)
{
    (void)sqlite3_close_v2(store->db);
    store->db = NULL;
    int code = sqlite3_open_v2(name, &store->db, flags | SQLITE_OPEN_NOMUTEX, NULL);
    if (code != SQLITE_OK)
        return sql_error(store, code, err);
    (void)sqlite3_busy_timeout(store->db, BUSY_MS);
    (void)sqlite3_extended_result_codes(store->db, 1);
    return probe(store, err);
}

/* Taking the file as it is leaves out what stands in a write-ahead log beside it: marks. */
static int refuse_log(const char *path, struct err *err)
{
    struct str name = {0};
    struct stat state;
    str_putf(&name, "%s-wal", path);
    int failed = str_failed(&name) ? err_memory(err, path) : ERR_OK;
    if (!failed && stat(str_text(&name), &state) == 0 && state.st_size > 0)
        failed = err_set(err, ERR_READ_ONLY,
                         "%s: its newest marks are in %s, which cannot be read where nothing can "
                         "be written; copy both files to a folder that can be written",
                         path, path_name(str_text(&name)));
    str_free(&name);
    return failed;
}

/* For reading, the file is opened for writing all the same where it can be, with queries only: a
 * connection that may not write would leave its -wal and -shm files lying about. On a disk that
 * cannot be written, the file is taken as it is. */
static int open_file(struct store *store, enum store_mode mode, struct err *err)
{
    int failed = open_as(store, store->path, SQLITE_OPEN_READWRITE, err);
    if (!failed && sqlite3_db_readonly(store->db, "main") == 1)
        failed = ERR_READ_ONLY;
    if (mode == STORE_WRITE)
        return failed == ERR_READ_ONLY && (!err || !err->code)
                   ? err_set(err, ERR_READ_ONLY, "%s: cannot be written; check its permissions",
                             store->path)
                   : failed;
    if (failed == ERR_FORMAT)
        return failed;
    if (!failed)
        return sql_run(store, "PRAGMA query_only = 1", err);
    if (!open_as(store, store->path, SQLITE_OPEN_READONLY, NULL))
        return ERR_OK;
    failed = refuse_log(store->path, err);
    if (failed)
        return failed;
    struct str uri = {0};
    if (immutable_uri(store->path, &uri))
        failed = err_memory(err, store->path);
    else
        failed = open_as(store, str_text(&uri), SQLITE_OPEN_READONLY | SQLITE_OPEN_URI, err);
    str_free(&uri);
    return failed;
}

static int set_up(struct store *store, struct err *err)
{
    return sql_run(store,
                   "PRAGMA foreign_keys = 1; PRAGMA trusted_schema = 0; PRAGMA synchronous = "
                   "FULL; PRAGMA cell_size_check = 1",
                   err);
}

static int check_kind(struct store *store, enum store_mode mode, struct err *err)
{
    int64_t application, version;
    int failed = sql_integer(store, "PRAGMA application_id", 0, &application, err);
    if (!failed)
        failed = sql_integer(store, "PRAGMA user_version", 0, &version, err);
    if (failed)
        return failed;
    if (application != APPLICATION_ID)
        return err_set(err, ERR_FORMAT,
                       "%s: a database, but not a case; make one with `incisura start`",
                       store->path);
    store->newer = version > migration_count;
    store->version = version;
    if (store->newer && mode == STORE_WRITE)
        return err_set(err, ERR_NEWER,
                       "%s: made by a newer program (version %lld, this one knows %d): it can be "
                       "read, not changed; update incisura",
                       store->path, (long long)version, migration_count);
    return ERR_OK;
}

/* Brings an older file up to this program's schema, all of it or nothing. */
static int migrate(struct store *store, struct err *err)
{
    int64_t version;
    int failed = sql_begin(store, err);
    if (failed)
        return failed;
    failed = sql_integer(store, "PRAGMA user_version", 0, &version, err);
    for (int64_t at = version; at < migration_count && !failed; at++) {
        char set[64];
        (void)snprintf(set, sizeof set, "PRAGMA user_version = %lld", (long long)at + 1);
        failed = sql_run(store, migrations[at], err);
        if (!failed)
            failed = sql_run(store, set, err);
    }
    failed = sql_end(store, failed, err);
    if (!failed)
        store->version = migration_count;
    return failed;
}

int header_read(struct store *store, struct arena *arena, struct case_header *out, struct err *err)
{
    enum { TEXTS = 4 };
    sqlite3_stmt *statement;
    int failed = sql_prepare(store,
                             "SELECT subject, procedure, rater, codebook, epoch_civil_ns, "
                             "utc_offset_s FROM case_info WHERE id = 1",
                             &statement, err);
    if (failed)
        return failed;
    int code = sqlite3_step(statement);
    if (code == SQLITE_ROW) {
        char *texts[TEXTS];
        for (int i = 0; i < TEXTS && !failed; i++) {
            texts[i] = sql_column_text(statement, i, arena);
            failed = texts[i] ? ERR_OK : err_memory(err, "a case");
        }
        if (!failed)
            *out = (struct case_header){texts[0],
                                        texts[1],
                                        texts[2],
                                        texts[3],
                                        (size_t)sqlite3_column_bytes(statement, 3),
                                        sql_column_time(statement, 4),
                                        sqlite3_column_int(statement, 5)};
    } else {
        failed =
            code == SQLITE_DONE
                ? err_set(err, ERR_FORMAT, "%s: an unfinished case; start it again", store->path)
                : sql_error(store, code, err);
    }
    (void)sqlite3_finalize(statement);
    return failed;
}

/* The header kept is the old one until the new one is read whole. */
int header_reload(struct store *store, struct err *err)
{
    struct arena arena = {0};
    struct case_header header;
    int failed = header_read(store, &arena, &header, err);
    if (failed) {
        arena_free(&arena);
        return failed;
    }
    arena_free(&store->header_arena);
    store->header_arena = arena;
    store->header = header;
    return ERR_OK;
}

static int set_rater(struct store *store, const char *rater, struct err *err)
{
    char *copy = strdup(rater && *rater ? rater : store->header.rater);
    if (!copy)
        return err_memory(err, "a rater");
    free(store->rater);
    store->rater = copy;
    return utf8_valid(copy, strlen(copy)) ? ERR_OK : err_set(err, ERR_USAGE, "rater is not UTF-8");
}

int store_open(const char *path, enum store_mode mode, const char *rater, struct store **out,
               struct err *err)
{
    struct mapped mapped;
    int failed = disk_files.map(&disk_files, path, &mapped, err);
    if (failed)
        return failed;
    bool empty = mapped.size == 0;
    disk_files.unmap(&disk_files, &mapped);
    if (empty)
        return err_set(err, ERR_FORMAT,
                       "%s: empty file, not a case; make one with `incisura start`", path);
    struct store *made = store_new(path);
    if (!made)
        return err_memory(err, path);
    made->writable = mode == STORE_WRITE;
    failed = open_file(made, mode, err);
    if (!failed)
        failed = set_up(made, err);
    if (!failed)
        failed = check_kind(made, mode, err);
    if (!failed && mode == STORE_WRITE)
        failed = migrate(made, err);
    if (!failed)
        failed = header_reload(made, err);
    if (!failed)
        failed = set_rater(made, rater, err);
    if (failed) {
        store_close(made);
        return failed;
    }
    (void)store_refresh(made);
    *out = made;
    return ERR_OK;
}

/* ---- creating ---- */

static int insert_header(struct store *store, const struct case_header *header, struct err *err)
{
    sqlite3_stmt *statement;
    int failed = sql_prepare(store,
                             "INSERT INTO case_info (id, subject, procedure, rater, codebook, "
                             "epoch_civil_ns, utc_offset_s) VALUES (1, ?, ?, ?, ?, ?, ?)",
                             &statement, err);
    if (failed)
        return failed;
    (void)sqlite3_bind_text(statement, 1, header->subject, -1, SQLITE_STATIC);
    (void)sqlite3_bind_text(statement, 2, header->procedure, -1, SQLITE_STATIC);
    (void)sqlite3_bind_text(statement, 3, header->rater, -1, SQLITE_STATIC);
    (void)sqlite3_bind_text(statement, 4, header->codebook_text, (int)header->codebook_size,
                            SQLITE_STATIC);
    sql_bind_time(statement, 5, header->epoch_civil_ns);
    (void)sqlite3_bind_int(statement, 6, header->utc_offset_s);
    return sql_finish(store, statement, err);
}

static int write_header(struct store *store, const struct case_header *header, struct err *err)
{
    int failed = sql_begin(store, err);
    if (failed)
        return failed;
    failed = insert_header(store, header, err);
    json_t *after = header_to_json(header);
    struct history_entry entry = {"create", 0, 0, NULL, after, ""};
    if (!failed)
        failed = after ? history_append(store, &entry, err)
                       : err_set(err, ERR_USAGE, "the case's texts are not UTF-8");
    json_decref(after);
    return sql_end(store, failed, err);
}

static int fill(struct store *store, const struct case_header *header, struct err *err)
{
    char pragma[96];
    (void)snprintf(pragma, sizeof pragma, "PRAGMA application_id = %d; PRAGMA journal_mode = WAL",
                   APPLICATION_ID);
    store->writable = true;
    int failed = open_as(store, store->path, SQLITE_OPEN_READWRITE, err);
    if (!failed)
        failed = sql_run(store, pragma, err);
    if (!failed)
        failed = set_up(store, err);
    if (!failed)
        failed = migrate(store, err);
    if (!failed)
        failed = set_rater(store, header->rater, err);
    return failed ? failed : write_header(store, header, err);
}

static void remove_files(const char *path)
{
    struct str name = {0};
    static const char *const endings[] = {"-wal", "-shm", ""};
    for (size_t i = 0; i < 3; i++) {
        str_clear(&name);
        str_putf(&name, "%s%s", path, endings[i]);
        if (!str_failed(&name))
            (void)unlink(str_text(&name));
    }
    str_free(&name);
}

int store_create(const char *path, const struct case_header *header, struct err *err)
{
    struct case_header full = *header;
    full.subject = full.subject ? full.subject : "";
    full.procedure = full.procedure ? full.procedure : "";
    full.rater = full.rater ? full.rater : "";
    int fd = open(path, O_RDWR | O_CREAT | O_EXCL | O_CLOEXEC, 0600);
    if (fd < 0 && errno == EEXIST)
        return err_set(err, ERR_CONFLICT, "%s: exists already; a case is never overwritten", path);
    if (fd < 0)
        return err_errno(err, path, "create it");
    (void)close(fd);
    struct store *made = store_new(path);
    int failed = made ? fill(made, &full, err) : err_memory(err, path);
    store_close(made);
    if (failed)
        remove_files(path);
    return failed;
}

/* ---- header ---- */

const struct case_header *store_header(const struct store *store)
{
    return &store->header;
}

const char *store_path(const struct store *store)
{
    return store->path;
}

bool store_writable(const struct store *store)
{
    return store->writable;
}

bool store_newer(const struct store *store)
{
    return store->newer;
}

static int epoch_fixed(struct store *store, struct err *err)
{
    return err_set(err, ERR_CONFLICT, "%s: the case's start is fixed already; open the case again",
                   store->path);
}

int epoch_fix_inside(struct store *store, int64_t epoch_civil_ns, struct err *err)
{
    sqlite3_stmt *statement;
    int failed = sql_prepare(
        store, "UPDATE case_info SET epoch_civil_ns = ? WHERE id = 1 AND epoch_civil_ns IS NULL",
        &statement, err);
    if (failed)
        return failed;
    (void)sqlite3_bind_int64(statement, 1, epoch_civil_ns);
    failed = sql_finish(store, statement, err);
    /* Another connection may have fixed it since this one read the header. */
    if (!failed && sqlite3_changes(store->db) == 0)
        return epoch_fixed(store, err);
    json_t *after = json_pack("{s:I}", "epoch_civil_ns", (json_int_t)epoch_civil_ns);
    struct history_entry entry = {"epoch", 0, 0, NULL, after, ""};
    if (!failed)
        failed = after ? history_append(store, &entry, err) : err_memory(err, "an epoch");
    json_decref(after);
    return failed;
}

int store_epoch_fix(struct store *store, int64_t epoch_civil_ns, struct err *err)
{
    if (store->header.epoch_civil_ns != NS_NONE)
        return epoch_fixed(store, err);
    int failed = sql_begin(store, err);
    if (!failed)
        failed = sql_end(store, epoch_fix_inside(store, epoch_civil_ns, err), err);
    return failed ? failed : header_reload(store, err);
}

bool store_refresh(struct store *store)
{
    int64_t version = 0;
    if (sql_integer(store, "PRAGMA data_version", 0, &version, NULL) ||
        version == store->data_version)
        return false;
    store->data_version = version;
    store->recordings_known = false;
    marks_forget(store);
    return true;
}

int store_log(struct store *store, const char *action, const char *detail, struct err *err)
{
    if (!utf8_valid(detail, strlen(detail)))
        return err_set(err, ERR_USAGE, "%s: its text for the history is not UTF-8", action);
    json_t *after = json_pack("{s:s}", "detail", detail);
    if (!after)
        return err_memory(err, action);
    struct history_entry entry = {action, 0, 0, NULL, after, ""};
    int failed = sql_begin(store, err);
    if (!failed)
        failed = sql_end(store, history_append(store, &entry, err), err);
    json_decref(after);
    return failed;
}
