/*
 * history.c - the append-only, hash-chained record of every change.
 *
 * Canonical bytes of a row, in this order: seq, utc_ns, object, step as 8 bytes little-endian
 * each; then rater, program, action, before, after, why, each as an 8-byte little-endian length
 * and UTF-8. d_0 is 32 zero bytes, d_i = BLAKE2b-256(d_{i-1} || row i) (RFC 7693). Lengths in
 * front, so that no two different rows have the same bytes.
 */
#include <stdlib.h>
#include <string.h>

#include "base/str.h"
#include "base/version.h"
#include "store/store_impl.h"

void chain_next(const uint8_t previous[DIGEST_SIZE], const void *row, size_t size,
                uint8_t out[DIGEST_SIZE])
{
    struct digester digester;
    digester_begin(&digester);
    digester_add(&digester, previous, DIGEST_SIZE);
    digester_add(&digester, row, size);
    digester_end(&digester, out);
}

struct row {
    int64_t seq, utc_ns, object, step;
    const char *texts[6]; /* rater, program, action, before, after, why */
    int lengths[6];       /* in bytes: a text with a NUL inside is not cut */
};

static void put_integer(struct str *out, int64_t value)
{
    char bytes[8];
    for (int i = 0; i < 8; i++)
        bytes[i] = (char)((uint64_t)value >> (8 * i) & 0xFF);
    str_put_n(out, bytes, sizeof bytes);
}

static int row_digest(const struct row *row, const uint8_t previous[DIGEST_SIZE],
                      uint8_t out[DIGEST_SIZE], struct err *err)
{
    struct str bytes = {0};
    put_integer(&bytes, row->seq);
    put_integer(&bytes, row->utc_ns);
    put_integer(&bytes, row->object);
    put_integer(&bytes, row->step);
    for (size_t i = 0; i < 6; i++) {
        put_integer(&bytes, row->lengths[i]);
        str_put_n(&bytes, row->texts[i], (size_t)row->lengths[i]);
    }
    int failed = str_failed(&bytes) ? err_memory(err, "a history row") : ERR_OK;
    if (!failed)
        chain_next(previous, bytes.text, bytes.length, out);
    str_free(&bytes);
    return failed;
}

/* Number and digest of the last row; 0 and zero bytes when there is none. */
static int last_row(struct store *store, int64_t *seq, uint8_t digest[DIGEST_SIZE], struct err *err)
{
    sqlite3_stmt *statement;
    int failed = sql_prepare(store, "SELECT seq, digest FROM history ORDER BY seq DESC LIMIT 1",
                             &statement, err);
    if (failed)
        return failed;
    memset(digest, 0, DIGEST_SIZE);
    *seq = 0;
    int code = sqlite3_step(statement);
    if (code == SQLITE_ROW) {
        *seq = sqlite3_column_int64(statement, 0);
        if (sqlite3_column_bytes(statement, 1) == DIGEST_SIZE)
            memcpy(digest, sqlite3_column_blob(statement, 1), DIGEST_SIZE);
        else
            failed = err_set(err, ERR_CONFLICT,
                             "%s: history row %lld has no digest; `history --verify` says more",
                             store->path, (long long)*seq);
    } else if (code != SQLITE_DONE) {
        failed = sql_error(store, code, err);
    }
    (void)sqlite3_finalize(statement);
    return failed;
}

static int insert_row(struct store *store, const struct row *row, const uint8_t digest[DIGEST_SIZE],
                      struct err *err)
{
    sqlite3_stmt *statement;
    int failed =
        sql_prepare(store,
                    "INSERT INTO history (seq, utc_ns, object, step, rater, program, action, "
                    "before, after, why, digest) VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
                    &statement, err);
    if (failed)
        return failed;
    (void)sqlite3_bind_int64(statement, 1, row->seq);
    (void)sqlite3_bind_int64(statement, 2, row->utc_ns);
    (void)sqlite3_bind_int64(statement, 3, row->object);
    (void)sqlite3_bind_int64(statement, 4, row->step);
    for (int i = 0; i < 6; i++)
        (void)sqlite3_bind_text(statement, 5 + i, row->texts[i], row->lengths[i], SQLITE_STATIC);
    (void)sqlite3_bind_blob(statement, 11, digest, DIGEST_SIZE, SQLITE_STATIC);
    return sql_finish(store, statement, err);
}

static char *json_text(const json_t *json)
{
    return json ? json_dumps(json, JSON_COMPACT) : strdup("");
}

int history_append(struct store *store, const struct history_entry *entry, struct err *err)
{
    uint8_t previous[DIGEST_SIZE], digest[DIGEST_SIZE];
    int64_t last = 0;
    if (entry->why && !utf8_valid(entry->why, strlen(entry->why)))
        return err_set(err, ERR_USAGE, "the reason for a change is not UTF-8");
    char *before = json_text(entry->before), *after = json_text(entry->after);
    int failed =
        before && after ? last_row(store, &last, previous, err) : err_memory(err, "a history row");
    if (!failed) {
        struct row row = {.seq = last + 1,
                          .utc_ns = utc_now_ns(),
                          .object = entry->object,
                          .step = entry->step,
                          .texts = {store->rater, "incisura " INCISURA_VERSION, entry->action,
                                    before, after, entry->why ? entry->why : ""}};
        for (int i = 0; i < 6; i++)
            row.lengths[i] = (int)strlen(row.texts[i]);
        failed = row_digest(&row, previous, digest, err);
        if (!failed)
            failed = insert_row(store, &row, digest, err);
    }
    free(before);
    free(after);
    return failed;
}

int history_new_step(struct store *store, int64_t *out, struct err *err)
{
    int failed = sql_integer(store, "SELECT max(step) FROM history", 0, out, err);
    if (!failed)
        (*out)++;
    return failed;
}

static const char select_rows[] = "SELECT seq, utc_ns, object, step, rater, program, action, "
                                  "before, after, why, digest FROM history ORDER BY seq";

static const char *column_text(sqlite3_stmt *statement, int column)
{
    const char *text = (const char *)sqlite3_column_text(statement, column);
    return text ? text : "";
}

static void take_row(sqlite3_stmt *statement, struct row *out)
{
    out->seq = sqlite3_column_int64(statement, 0);
    out->utc_ns = sqlite3_column_int64(statement, 1);
    out->object = sqlite3_column_int64(statement, 2);
    out->step = sqlite3_column_int64(statement, 3);
    for (int i = 0; i < 6; i++) {
        out->texts[i] = column_text(statement, 4 + i);
        out->lengths[i] = sqlite3_column_bytes(statement, 4 + i);
    }
}

int store_history(struct store *store, int (*each)(const struct history_row *row, void *context),
                  void *context, struct err *err)
{
    sqlite3_stmt *statement;
    int failed = sql_prepare(store, select_rows, &statement, err), code = SQLITE_DONE;
    if (failed)
        return failed;
    while (!failed && (code = sqlite3_step(statement)) == SQLITE_ROW) {
        struct row row;
        take_row(statement, &row);
        struct history_row out = {
            .seq = row.seq,
            .utc_ns = row.utc_ns,
            .rater = row.texts[0],
            .program = row.texts[1],
            .action = row.texts[2],
            .object = row.object,
            .before = row.texts[3],
            .after = row.texts[4],
            .why = row.texts[5],
        };
        if (sqlite3_column_bytes(statement, 10) == DIGEST_SIZE)
            digest_text(sqlite3_column_blob(statement, 10), out.digest);
        failed = each(&out, context);
    }
    if (!failed && code != SQLITE_DONE)
        failed = sql_error(store, code, err);
    (void)sqlite3_finalize(statement);
    return failed;
}

/* One row against the one before: its number and its digest. */
static int check_row(struct store *store, sqlite3_stmt *statement, int64_t expected,
                     uint8_t previous[DIGEST_SIZE], struct err *err)
{
    struct row row;
    uint8_t digest[DIGEST_SIZE];
    take_row(statement, &row);
    if (row.seq != expected)
        return err_set(err, ERR_CONFLICT, "%s: history row %lld is missing or renumbered",
                       store->path, (long long)expected);
    int failed = row_digest(&row, previous, digest, err);
    if (failed)
        return failed;
    if (sqlite3_column_bytes(statement, 10) != DIGEST_SIZE ||
        memcmp(sqlite3_column_blob(statement, 10), digest, DIGEST_SIZE) != 0)
        return err_set(err, ERR_CONFLICT,
                       "%s: history row %lld (%s) does not match its digest: it, or a row before "
                       "it, was altered",
                       store->path, (long long)row.seq, row.texts[2]);
    memcpy(previous, digest, DIGEST_SIZE);
    return ERR_OK;
}

int history_check(struct store *store, int64_t *rows, int64_t *bad_seq, uint8_t head[DIGEST_SIZE],
                  struct err *err)
{
    sqlite3_stmt *statement;
    int failed = sql_prepare(store, select_rows, &statement, err), code = SQLITE_DONE;
    if (failed)
        return failed;
    memset(head, 0, DIGEST_SIZE);
    *rows = 0;
    while (!failed && (code = sqlite3_step(statement)) == SQLITE_ROW) {
        failed = check_row(store, statement, *rows + 1, head, err);
        if (failed == ERR_CONFLICT)
            *bad_seq = *rows + 1;
        else
            (*rows)++;
    }
    if (!failed && code != SQLITE_DONE)
        failed = sql_error(store, code, err);
    (void)sqlite3_finalize(statement);
    return failed;
}
