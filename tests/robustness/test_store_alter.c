/*
 * test_store_alter.c - a case altered behind the program's back, with plain SQL: verifying finds it
 * and says what.
 */
#include <criterion/criterion.h>

#include <sqlite3.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "store/live.h"

static char folder[] = "/tmp/incisura-alter-XXXXXX";
static char path[64], copy[64];

static void set_up(void)
{
    static const struct case_header header = {.subject = "S-1",
                                              .rater = "KM",
                                              .codebook_text = "x",
                                              .codebook_size = 1,
                                              .epoch_civil_ns = 5};
    struct store *store = NULL;
    struct err err = {0};
    int64_t id;
    cr_assert_not_null(mkdtemp(folder));
    (void)snprintf(path, sizeof path, "%s/c.case", folder);
    (void)snprintf(copy, sizeof copy, "%s/d.case", folder);
    cr_assert_eq(store_create(path, &header, &err), 0);
    cr_assert_eq(store_open(path, STORE_WRITE, NULL, &store, &err), 0);
    for (int i = 0; i < 3; i++) {
        struct mark mark = {.code = "incision",
                            .onset_ns = i,
                            .until_ns = NS_NONE,
                            .unit = "",
                            .route = "",
                            .note = "as seen",
                            .state = MARK_MARKED,
                            .stamp_clock = "",
                            .stamp_ns = NS_NONE,
                            .stamp_utc_ns = 1};
        cr_assert_eq(store_mark_add(store, &mark, "why", &id, &err), 0);
    }
    struct stored_recording recording = {
        .path = "/a", .digest = "d", .options = "", .start_civil_ns = NS_NONE};
    cr_assert_eq(store_recording_add(store, &recording, &id, &err), 0);
    struct live_session session = {.uid = "u",
                                   .host = "elsewhere",
                                   .machine = "m",
                                   .boot_id = "b",
                                   .rater = "KM",
                                   .epoch_civil_ns = 5,
                                   .ended_utc_ns = NS_NONE};
    cr_assert_eq(store_session_begin(store, &session, false, &err), 0, "%s", err.text);
    const struct stored_stream stream = {"/s.bdf", "u", "fifo:x", "[[0,1,2,1,0]]"};
    recording.path = "/s.bdf";
    (void)strcpy(recording.digest, "e");
    cr_assert_eq(store_stream_keep(store, &stream, &err), 0, "%s", err.text);
    cr_assert_eq(store_stream_attach(store, &stream, &recording, &id, &err), 0, "%s", err.text);
    store_close(store);
}

static void tear_down(void)
{
    char command[128];
    (void)snprintf(command, sizeof command, "rm -rf %s", folder);
    cr_expect_eq(system(command), 0);
}

TestSuite(store_alter, .init = set_up, .fini = tear_down);

/* The triggers in the way are dropped first, as someone who means it would. */
static void alter(const char *sql)
{
    char command[160], *message = NULL;
    sqlite3 *db = NULL;
    (void)snprintf(command, sizeof command, "cp %s %s", path, copy);
    cr_assert_eq(system(command), 0);
    cr_assert_eq(sqlite3_open(copy, &db), SQLITE_OK);
    (void)sqlite3_exec(db,
                       "DROP TRIGGER history_never_updated; DROP TRIGGER history_never_deleted; "
                       "DROP TRIGGER marks_keep_stamp; DROP TRIGGER marks_never_deleted",
                       NULL, NULL, NULL);
    cr_assert_eq(sqlite3_exec(db, sql, NULL, NULL, &message), SQLITE_OK, "%s: %s", sql, message);
    (void)sqlite3_close(db);
}

static int verify(struct err *err, int64_t *bad)
{
    struct store *store = NULL;
    int64_t rows;
    cr_assert_eq(store_open(copy, STORE_READ, NULL, &store, err), 0, "%s", err->text);
    int failed = store_verify(store, &rows, bad, NULL, err);
    store_close(store);
    return failed;
}

Test(store_alter, triggers_stand_in_the_way)
{
    static const char *const attempts[] = {"UPDATE history SET why = ''",
                                           "DELETE FROM history",
                                           "DELETE FROM marks",
                                           "UPDATE marks SET stamp_utc_ns = 5",
                                           "UPDATE marks SET rater = 'x'",
                                           "UPDATE marks SET state = 'gone'",
                                           "UPDATE marks SET onset_ns = 'soon'"};
    sqlite3 *db = NULL;
    cr_assert_eq(sqlite3_open(path, &db), SQLITE_OK);
    for (size_t i = 0; i < sizeof attempts / sizeof *attempts; i++)
        cr_expect_neq(sqlite3_exec(db, attempts[i], NULL, NULL, NULL), SQLITE_OK, "%s",
                      attempts[i]);
    (void)sqlite3_close(db);
}

Test(store_alter, every_alteration_is_named)
{
    static const struct {
        const char *sql, *says;
        int64_t bad;
    } rows[] = {
        {"UPDATE history SET utc_ns = utc_ns + 1 WHERE seq = 3", "history row 3", 3},
        {"UPDATE history SET rater = 'XX' WHERE seq = 2", "history row 2", 2},
        {"UPDATE history SET program = 'p' WHERE seq = 2", "history row 2", 2},
        {"UPDATE history SET action = 'mark-change' WHERE seq = 2", "history row 2", 2},
        {"UPDATE history SET object = 3 WHERE seq = 2", "history row 2", 2},
        {"UPDATE history SET step = 9 WHERE seq = 2", "history row 2", 2},
        {"UPDATE history SET before = '{}' WHERE seq = 2", "history row 2", 2},
        {"UPDATE history SET after = replace(after, 'seen', 'been') WHERE seq = 4", "history row 4",
         4},
        {"UPDATE history SET why = why || char(0) || 'x' WHERE seq = 4", "history row 4", 4},
        {"UPDATE history SET digest = zeroblob(32) WHERE seq = 1", "history row 1", 1},
        {"DELETE FROM history WHERE seq = 3", "history row 3 is missing", 3},
        {"UPDATE history SET seq = -1 WHERE seq = 2; UPDATE history SET seq = 2 WHERE seq = 3; "
         "UPDATE history SET seq = 3 WHERE seq = -1",
         "history row 2", 2},
        {"DELETE FROM history WHERE seq >= 7", "recording 2 is not in the history", 0},
        {"UPDATE marks SET onset_ns = 77 WHERE id = 2",
         "mark 2: onset_ns is 77, the history says 1", 0},
        {"UPDATE marks SET note = 'other' WHERE id = 3", "mark 3: note", 0},
        {"UPDATE marks SET stamp_utc_ns = 2 WHERE id = 1", "mark 1: stamp_utc_ns", 0},
        {"DELETE FROM marks WHERE id = 2", "mark 2 is in the history and not in the case", 0},
        {"INSERT INTO marks SELECT 9, code, onset_ns, until_ns, value, unit, route, note, state, "
         "source, rater, error_ns, stamp_clock, stamp_ns, stamp_utc_ns FROM marks WHERE id = 1",
         "mark 9 is not in the history", 0},
        {"UPDATE recordings SET path = '/b'", "recording 1: path", 0},
        {"UPDATE sessions SET case_minus_boottime_ns = 1", "session 1: case_minus_boottime_ns", 0},
        {"UPDATE sessions SET ended_utc_ns = 1", "session 1: ended_utc_ns", 0},
        {"DELETE FROM sessions", "session 1 is in the history and not in the case", 0},
        {"INSERT INTO sessions SELECT 2, 'v', host, machine, boot_id, pid, process_start, rater, "
         "begun_utc_ns, case_minus_boottime_ns, tie_error_ns, 1 FROM sessions",
         "session 2 is not in the history", 0},
        {"UPDATE clocks SET clock = '[[0,1,3,1,0]]'", "clock of recording 2: clock", 0},
        {"DELETE FROM clocks", "clock of recording 2 is in the history", 0},
        {"INSERT INTO clocks VALUES (1, '[[0,1,3,1,0]]')",
         "clock of recording 1 is not in the history", 0},
        {"DELETE FROM recordings", "recording 1 is in the history", 0},
        {"UPDATE case_info SET subject = 'S-2'", "subject", 0},
        {"UPDATE case_info SET codebook = 'y'", "codebook_digest", 0},
        {"UPDATE case_info SET epoch_civil_ns = 6", "epoch_civil_ns", 0},
        {"UPDATE case_info SET codebook = 'x' || char(0) || hex(zeroblob(100000))",
         "codebook_digest", 0},
        {"UPDATE case_info SET subject = subject || char(0) || 'x'", "case 1 holds", 0},
        {"UPDATE case_info SET utc_offset_s = utc_offset_s + 4294967296", "case 1 holds", 0},
        {"UPDATE marks SET note = note || char(0) || 'x' WHERE id = 2", "mark 2 holds", 0},
        {"UPDATE marks SET code = code || char(0) WHERE id = 3", "mark 3 holds", 0},
        {"PRAGMA ignore_check_constraints = 1; UPDATE marks SET source = 'bogus' WHERE id = 1",
         "mark 1", 0},
        {"PRAGMA ignore_check_constraints = 1; UPDATE marks SET state = 'bogus' WHERE id = 1",
         "mark 1", 0},
        {"UPDATE recordings SET options = char(0) || 'x'", "recording 1 holds", 0},
    };
    struct err err = {0};
    int64_t bad;
    alter("SELECT 1");
    cr_expect_eq(verify(&err, &bad), 0, "%s", err.text);
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        alter(rows[i].sql);
        cr_expect_eq(verify(&err, &bad), ERR_CONFLICT, "%s", rows[i].sql);
        cr_expect_not_null(strstr(err.text, rows[i].says), "%s: %s", rows[i].sql, err.text);
        cr_expect_eq(bad, rows[i].bad, "%s", rows[i].sql);
    }
}
