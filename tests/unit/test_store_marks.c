/*
 * test_store_marks.c - a case on disk: creating, opening, marks, undo, recordings.
 */
#include <criterion/criterion.h>

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <sys/wait.h>
#include <unistd.h>

#include "store/store.h"

static char folder[] = "/tmp/incisura-store-XXXXXX";
static char path[64];
static struct err err;

static void set_up(void)
{
    static const char book[] = "code,key,kind\nincision,i,point\n";
    static const struct case_header header = {.subject = "S-1",
                                              .procedure = "keyhole",
                                              .rater = "KM",
                                              .codebook_text = book,
                                              .codebook_size = sizeof book - 1,
                                              .epoch_civil_ns = NS_NONE,
                                              .utc_offset_s = 7200};
    cr_assert_not_null(mkdtemp(folder));
    (void)snprintf(path, sizeof path, "%s/c.case", folder);
    cr_assert_eq(store_create(path, &header, &err), 0, "%s", err.text);
}

static void tear_down(void)
{
    char command[128];
    (void)snprintf(command, sizeof command, "rm -rf %s", folder);
    cr_expect_eq(system(command), 0);
}

TestSuite(store, .init = set_up, .fini = tear_down);

static struct store *open_store(enum store_mode mode, const char *rater)
{
    struct store *store = NULL;
    cr_assert_eq(store_open(path, mode, rater, &store, &err), 0, "%s", err.text);
    return store;
}

static struct mark point(const char *code, int64_t onset_s)
{
    return (struct mark){.code = code,
                         .onset_ns = onset_s * NS_PER_S,
                         .until_ns = NS_NONE,
                         .unit = "",
                         .route = "",
                         .note = "",
                         .state = MARK_MARKED,
                         .source = MARK_COMMAND,
                         .stamp_clock = "",
                         .stamp_ns = NS_NONE,
                         .stamp_utc_ns = NS_NONE};
}

static int64_t add(struct store *store, const char *code, int64_t onset_s)
{
    struct mark mark = point(code, onset_s);
    int64_t id = 0;
    cr_assert_eq(store_mark_add(store, &mark, "", &id, &err), 0, "%s", err.text);
    return id;
}

static const struct mark *get(struct store *store, int64_t id)
{
    const struct mark *marks;
    size_t count;
    cr_assert_eq(store_marks(store, &marks, &count, &err), 0);
    for (size_t i = 0; i < count; i++) {
        if (marks[i].id == id)
            return &marks[i];
    }
    return NULL;
}

static int64_t verified_rows(struct store *store)
{
    int64_t rows = 0, bad;
    cr_assert_eq(store_verify(store, &rows, &bad, NULL, &err), 0, "%s", err.text);
    return rows;
}

Test(store, header_mode_and_second_creation)
{
    struct store *store = open_store(STORE_READ, NULL);
    const struct case_header *header = store_header(store);
    struct stat state;
    cr_expect_str_eq(header->subject, "S-1");
    cr_expect_eq(header->utc_offset_s, 7200);
    cr_expect_eq(header->epoch_civil_ns, NS_NONE);
    cr_assert_eq(stat(path, &state), 0);
    cr_expect_eq(state.st_mode & 0777, 0600);
    cr_expect_eq(store_create(path, header, &err), ERR_CONFLICT);
    struct mark mark = point("incision", 1);
    int64_t id;
    cr_expect_eq(store_mark_add(store, &mark, "", &id, &err), ERR_READ_ONLY);
    store_close(store);
}

Test(store, marks_in_order_with_rater_and_stamp)
{
    struct store *store = open_store(STORE_WRITE, "JB");
    const struct mark *marks;
    size_t count;
    int64_t late = add(store, "incision", 20), early = add(store, "incision", 10);
    cr_assert_eq(store_marks(store, &marks, &count, &err), 0);
    cr_assert_eq(count, 2);
    cr_expect(marks[0].id == early && marks[1].id == late);
    cr_expect_str_eq(marks[0].rater, "JB");
    cr_expect_neq(marks[0].stamp_utc_ns, NS_NONE);
    struct mark changed = marks[0];
    int64_t stamp = changed.stamp_utc_ns;
    changed.onset_ns += 5;
    changed.stamp_utc_ns = 1;
    changed.rater = "someone else";
    changed.has_value = true;
    changed.value = 0.1;
    changed.note = "\xC3\xA4 \"quoted\"";
    cr_assert_eq(store_mark_change(store, &changed, "moved onto the cut", &err), 0);
    const struct mark *now = get(store, early);
    cr_expect_eq(now->onset_ns, 10 * NS_PER_S + 5);
    cr_expect_eq(now->value, 0.1);
    cr_expect_eq(now->stamp_utc_ns, stamp, "a stamp is never changed");
    cr_expect_str_eq(now->rater, "JB");
    int64_t rows = verified_rows(store);
    struct mark same = *now;
    cr_assert_eq(store_mark_change(store, &same, "", &err), 0);
    cr_expect_eq(verified_rows(store), rows, "nothing changed, no row");
    same.id = 99;
    cr_expect_eq(store_mark_change(store, &same, "", &err), ERR_NOT_FOUND);
    same.note = "\xFF";
    cr_expect_eq(store_mark_change(store, &same, "", &err), ERR_NOT_FOUND);
    store_close(store);
}

/* A mark read from the list lasts until the next change alone: it is read afresh each time. */
static void note(struct store *store, int64_t id, const char *text)
{
    struct mark changed = *get(store, id);
    changed.note = text;
    cr_assert_eq(store_mark_change(store, &changed, "", &err), 0, "%s", err.text);
}

static bool undo(struct store *store)
{
    bool done;
    char what[120];
    cr_assert_eq(store_undo(store, &done, what, sizeof what, &err), 0, "%s", err.text);
    return done;
}

static bool redo(struct store *store)
{
    bool done;
    cr_assert_eq(store_redo(store, &done, NULL, 0, &err), 0, "%s", err.text);
    return done;
}

Test(store, undo_and_redo_step_by_step_and_across_reopening)
{
    struct store *store = open_store(STORE_WRITE, NULL);
    cr_expect_not(undo(store), "nothing to undo");
    int64_t id = add(store, "incision", 10);
    note(store, id, "first");
    note(store, id, "second");
    cr_expect(undo(store));
    cr_expect_str_eq(get(store, id)->note, "first");
    store_close(store);
    store = open_store(STORE_WRITE, NULL);
    cr_expect(undo(store));
    cr_expect_str_eq(get(store, id)->note, "");
    cr_expect(undo(store));
    cr_expect_eq(get(store, id)->state, MARK_REJECTED);
    cr_expect_not(undo(store));
    cr_expect(redo(store));
    cr_expect_eq(get(store, id)->state, MARK_MARKED);
    cr_expect(redo(store));
    cr_expect_str_eq(get(store, id)->note, "first");
    note(store, id, "third");
    cr_expect_not(redo(store), "a new change ends what could be redone");
    cr_expect(undo(store));
    cr_expect_str_eq(get(store, id)->note, "first");
    cr_expect(redo(store));
    cr_expect_str_eq(get(store, id)->note, "third");
    (void)verified_rows(store);
    store_close(store);
}

Test(store, an_import_is_one_step)
{
    enum { MANY = 10000 };
    struct store *store = open_store(STORE_WRITE, NULL);
    struct mark *marks = calloc(MANY, sizeof *marks);
    const struct mark *all;
    size_t count, rejected = 0;
    for (int i = 0; i < MANY; i++)
        marks[i] = point("incision", i);
    cr_assert_eq(store_mark_add_all(store, marks, 100, "import", &err), 0);
    marks[50].code = "";
    cr_expect_eq(store_mark_add_all(store, marks, 100, "import", &err), ERR_USAGE);
    cr_assert_eq(store_marks(store, &all, &count, &err), 0);
    cr_expect_eq(count, 100, "all or none");
    cr_expect(undo(store));
    cr_assert_eq(store_marks(store, &all, &count, &err), 0);
    for (size_t i = 0; i < count; i++)
        rejected += all[i].state == MARK_REJECTED;
    cr_expect_eq(rejected, 100);
    cr_expect(redo(store));
    (void)verified_rows(store);
    free(marks);
    store_close(store);
}

Test(store, epoch_and_recordings)
{
    struct store *store = open_store(STORE_WRITE, NULL);
    struct stored_recording recording = {.path = "/x/a.edf",
                                         .size = 5,
                                         .modified_ns = 7,
                                         .digest = "aa",
                                         .options = "role=x=ecg\n",
                                         .start_civil_ns = NS_NONE};
    const struct stored_recording *list;
    size_t count;
    int64_t id;
    cr_assert_eq(store_epoch_fix(store, 1000, &err), 0);
    cr_expect_eq(store_header(store)->epoch_civil_ns, 1000);
    cr_expect_eq(store_epoch_fix(store, 2000, &err), ERR_CONFLICT);
    cr_assert_eq(store_recording_add(store, &recording, &id, &err), 0);
    cr_expect_eq(store_recording_add(store, &recording, &id, &err), ERR_CONFLICT);
    int64_t rows = verified_rows(store);
    cr_assert_eq(store_recording_found(store, id, "/x/a.edf", 9, &err), 0);
    cr_expect_eq(verified_rows(store), rows, "another time of last change is no change");
    cr_assert_eq(store_recording_found(store, id, "/y/b.edf", 9, &err), 0);
    cr_expect_eq(verified_rows(store), rows + 1);
    cr_assert_eq(store_recordings(store, &list, &count, &err), 0);
    cr_expect(count == 1 && strcmp(list[0].path, "/y/b.edf") == 0 && list[0].modified_ns == 9);
    store_close(store);
}

Test(store, another_connection_is_noticed)
{
    struct store *one = open_store(STORE_WRITE, NULL), *two = open_store(STORE_READ, NULL);
    const struct mark *marks;
    size_t count;
    cr_assert_eq(store_marks(two, &marks, &count, &err), 0);
    cr_expect_not(store_refresh(two));
    (void)add(one, "incision", 1);
    cr_expect(store_refresh(two));
    cr_assert_eq(store_marks(two, &marks, &count, &err), 0);
    cr_expect_eq(count, 1);
    store_close(two);
    store_close(one);
}

Test(store, two_connections_cannot_both_fix_or_attach)
{
    static const struct stored_recording recording = {
        .path = "/x/a.edf", .digest = "aa", .options = "", .start_civil_ns = NS_NONE};
    struct store *one = open_store(STORE_WRITE, NULL), *two = open_store(STORE_WRITE, NULL);
    const struct stored_recording *list;
    size_t count;
    int64_t id;
    cr_assert_eq(store_recordings(two, &list, &count, &err), 0);
    cr_assert_eq(store_epoch_fix(one, 1000, &err), 0);
    (void)verified_rows(two);
    cr_expect_eq(store_epoch_fix(two, 2000, &err), ERR_CONFLICT);
    cr_assert_eq(store_recording_add(one, &recording, &id, &err), 0);
    cr_expect_eq(store_recording_add(two, &recording, &id, &err), ERR_CONFLICT);
    cr_expect_not_null(strstr(err.text, "attached already"), "%s", err.text);
    (void)verified_rows(one);
    store_close(two);
    store_close(one);
    one = open_store(STORE_READ, NULL);
    cr_expect_eq(store_header(one)->epoch_civil_ns, 1000);
    store_close(one);
}

Test(store, what_cannot_be_stored_is_said_so)
{
    struct store *store = open_store(STORE_WRITE, NULL);
    struct mark mark = point("incision", 1);
    struct stored_recording recording = {
        .path = "/x/\xFF", .digest = "aa", .options = "", .start_civil_ns = NS_NONE};
    int64_t id;
    mark.has_value = true;
    for (int i = 0; i < 2; i++) {
        mark.value = i ? INFINITY : NAN;
        cr_expect_eq(store_mark_add(store, &mark, "", &id, &err), ERR_USAGE, "%s", err.text);
    }
    mark.value = 1;
    cr_expect_eq(store_mark_add(store, &mark, "\xFF", &id, &err), ERR_USAGE, "%s", err.text);
    mark.stamp_clock = "\xFF";
    cr_expect_eq(store_mark_add(store, &mark, "", &id, &err), ERR_USAGE, "%s", err.text);
    cr_expect_eq(store_log(store, "export", "\xFF", &err), ERR_USAGE, "%s", err.text);
    cr_expect_eq(store_recording_add(store, &recording, &id, &err), ERR_USAGE, "%s", err.text);
    cr_expect_eq(verified_rows(store), 1);
    store_close(store);
}

/* What undo and redo must do, kept as two stacks; the store keeps nothing but its history. */
Test(store, undo_and_redo_in_any_order_as_two_stacks_would)
{
    enum { STEPS = 300 };
    static char notes[STEPS + 1][12];
    struct store *store = open_store(STORE_WRITE, NULL);
    int done[STEPS], undone[STEPS], done_count = 0, undone_count = 0;
    uint32_t state = 11;
    int64_t id = add(store, "incision", 1);
    for (int i = 0; i < STEPS; i++) {
        state = state * 1664525u + 1013904223u;
        switch (state >> 24 & 3) {
        case 0:
        case 1:
            (void)snprintf(notes[i + 1], sizeof notes[0], "%d", i + 1);
            note(store, id, notes[i + 1]);
            done[done_count++] = i + 1;
            undone_count = 0;
            break;
        case 2:
            if (done_count > 0) {
                cr_assert(undo(store), "step %d", i);
                undone[undone_count++] = done[--done_count];
            }
            break;
        default:
            cr_assert_eq(redo(store), undone_count > 0, "step %d", i);
            if (undone_count > 0)
                done[done_count++] = undone[--undone_count];
        }
        cr_assert_str_eq(get(store, id)->note, notes[done_count ? done[done_count - 1] : 0],
                         "step %d", i);
    }
    (void)verified_rows(store);
    store_close(store);
}

/* A case copied with its write-ahead log to where nothing can be written, read by someone who is
 * not root. 0 when the program says that it cannot show all of it. */
static int read_where_nothing_can_be_written(const char *copy)
{
    struct store *store = NULL;
    if (geteuid() == 0 && setresuid(65534, 65534, 65534) != 0)
        return 2;
    int failed = store_open(copy, STORE_READ, NULL, &store, &err);
    store_close(store);
    return failed == ERR_READ_ONLY && strstr(err.text, "d.case-wal") ? 0 : 1;
}

Test(store, marks_in_the_log_are_never_left_out_in_silence)
{
    struct store *store = open_store(STORE_WRITE, NULL);
    char command[1024], copy[96];
    int status = -1;
    (void)add(store, "incision", 1);
    (void)snprintf(copy, sizeof copy, "%s/ro/d.case", folder);
    (void)snprintf(command, sizeof command,
                   "chmod 755 %s && mkdir %s/ro && cp %s %s && cp %s-wal %s-wal && "
                   "chmod 444 %s* && chmod 555 %s/ro",
                   folder, folder, path, copy, path, copy, copy, folder);
    cr_assert_eq(system(command), 0);
    pid_t pid = fork();
    if (pid == 0)
        _exit(read_where_nothing_can_be_written(copy));
    cr_assert_eq(waitpid(pid, &status, 0), pid);
    cr_expect(WIFEXITED(status) && WEXITSTATUS(status) == 0, "status %d", status);
    (void)snprintf(command, sizeof command, "chmod 755 %s/ro", folder);
    cr_assert_eq(system(command), 0);
    store_close(store);
}
