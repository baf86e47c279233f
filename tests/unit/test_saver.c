/*
 * test_saver.c - the saving thread: in order, off the caller's thread, and through a case that is
 * locked, moved, removed or put back.
 */
#include "live_case.h"

#include <sqlite3.h>

enum { PAUSE_MS = 5 };

TestSuite(saver, .init = live_case_set_up, .fini = live_case_tear_down);

static struct live_session session;

static struct saver *start(void)
{
    struct saver *saver = NULL;
    struct err err = {0};
    session = live_session_here();
    cr_assert_eq(saver_start(live_open(), &session, PAUSE_MS, &saver, &err), 0, "%s", err.text);
    return saver;
}

static int64_t add(struct saver *saver, int64_t onset_ns)
{
    struct live_change change = live_add(0, onset_ns, "");
    struct err err = {0};
    int64_t number = 0;
    cr_assert_eq(saver_change(saver, &change, &number, &err), 0, "%s", err.text);
    return number;
}

static int stop(struct saver *saver, int wait_ms, struct err *err)
{
    struct store *store = NULL;
    int failed = saver_stop(saver, wait_ms, &store, err);
    store_close(store);
    return failed;
}

static int64_t files_waiting(void)
{
    struct store *store = live_open();
    struct err err = {0};
    int64_t files = 0;
    cr_assert_eq(second_place_count(store, &files, &err), 0);
    store_close(store);
    return files;
}

Test(saver, saves_in_order_and_knows_what_is_durable)
{
    struct saver *saver = start();
    struct err err = {0};
    for (int i = 0; i < 50; i++)
        cr_assert_eq(add(saver, i), i + 1);
    struct live_change close = live_add(0, 7, "changed");
    int64_t number;
    close.kind = LIVE_CHANGE;
    close.of_number = 8;
    cr_assert_eq(saver_change(saver, &close, &number, &err), 0);
    cr_assert(live_until(saver, live_all_saved));
    cr_expect_eq(saver_mark_id(saver, 8), saver_mark_id(saver, number));
    for (int i = 2; i <= 50; i++)
        cr_expect_geq(saver_durable_ns(saver, i), saver_durable_ns(saver, i - 1));
    cr_expect_eq(saver_mark_id(saver, 1000), 0);
    cr_assert_eq(stop(saver, 1000, &err), 0, "%s", err.text);
    cr_expect_eq(live_stored(), 50);
    cr_expect_eq(files_waiting(), 0);
}

Test(saver, a_locked_case_goes_to_the_second_place_and_on)
{
    struct saver *saver = start();
    struct err err = {0};
    sqlite3 *other = NULL;
    add(saver, 1);
    cr_assert(live_until(saver, live_all_saved));
    cr_assert_eq(sqlite3_open(live_path, &other), SQLITE_OK);
    cr_assert_eq(sqlite3_exec(other, "BEGIN IMMEDIATE", NULL, NULL, NULL), SQLITE_OK);
    add(saver, 2);
    add(saver, 3);
    cr_assert(live_until(saver, live_all_kept), "both are in the second place");
    struct saver_status status;
    saver_status(saver, &status);
    cr_expect(strstr(status.why, "in use by another program"), "%s", status.why);
    cr_expect_eq(status.saved, 1);
    cr_assert_eq(sqlite3_exec(other, "ROLLBACK", NULL, NULL, NULL), SQLITE_OK);
    (void)sqlite3_close(other);
    cr_assert(live_until(saver, live_all_saved));
    cr_assert_eq(stop(saver, 1000, &err), 0, "%s", err.text);
    cr_expect_eq(live_stored(), 3);
    cr_expect_eq(files_waiting(), 0);
}

static bool failing(const struct saver_status *status)
{
    return status->failing;
}

Test(saver, a_case_that_was_moved_takes_all_along_when_it_is_back)
{
    struct saver *saver = start();
    struct err err = {0};
    char away[80];
    (void)snprintf(away, sizeof away, "%s/away.case", live_folder);
    add(saver, 1);
    cr_assert(live_until(saver, live_all_saved));
    cr_assert_eq(rename(live_path, away), 0);
    cr_assert(live_until(saver, failing), "seen without any key");
    add(saver, 2);
    cr_assert(live_until(saver, live_all_kept), "what was saved before is kept again as well");
    struct saver_status status;
    saver_status(saver, &status);
    cr_expect_eq(status.saved, 0);
    cr_expect(strstr(status.why, "moved or removed"), "%s", status.why);
    cr_assert_eq(rename(away, live_path), 0);
    cr_assert(live_until(saver, live_all_saved));
    cr_assert_eq(stop(saver, 1000, &err), 0, "%s", err.text);
    cr_expect_eq(live_stored(), 2);
}

/* Copies the case as it is in the file, its log brought in. */
static void copy_case(const char *to)
{
    struct store *store = live_open(); /* closing the last connection brings the log in */
    store_close(store);
    char command[256];
    (void)snprintf(command, sizeof command, "cp %s %s", live_path, to);
    cr_assert_eq(system(command), 0);
}

Test(saver, a_removed_case_put_back_from_a_copy_gets_everything)
{
    char copy[80], command[256];
    struct err err = {0};
    (void)snprintf(copy, sizeof copy, "%s/copy", live_folder);
    copy_case(copy);
    struct saver *saver = start();
    for (int i = 0; i < 3; i++)
        add(saver, i);
    cr_assert(live_until(saver, live_all_saved));
    (void)snprintf(command, sizeof command, "rm -f %s %s-wal %s-shm", live_path, live_path,
                   live_path);
    cr_assert_eq(system(command), 0);
    cr_assert(live_until(saver, live_all_kept));
    (void)snprintf(command, sizeof command, "cp %s %s", copy, live_path);
    cr_assert_eq(system(command), 0);
    add(saver, 3);
    cr_assert(live_until(saver, live_all_saved));
    cr_assert_eq(stop(saver, 1000, &err), 0, "%s", err.text);
    cr_expect_eq(live_stored(), 4);
}

/* So fast that nobody saw that it was gone. */
Test(saver, a_case_that_was_exchanged_for_an_older_copy_gets_everything)
{
    char copy[80], command[512];
    struct err err = {0};
    (void)snprintf(copy, sizeof copy, "%s/copy", live_folder);
    copy_case(copy);
    struct saver *saver = start();
    for (int i = 0; i < 3; i++)
        add(saver, i);
    cr_assert(live_until(saver, live_all_saved));
    (void)snprintf(command, sizeof command, "rm -f %s-wal %s-shm; mv %s %s", live_path, live_path,
                   copy, live_path);
    cr_assert_eq(system(command), 0);
    add(saver, 3);
    struct saver_status status;
    do
        saver_status(saver, &status);
    while (saver_durable_ns(saver, 4) == NS_NONE || status.saved < 4);
    cr_assert_eq(stop(saver, 1000, &err), 0, "%s", err.text);
    cr_expect_eq(live_stored(), 4);
}

Test(saver, ends_although_nothing_can_be_saved_and_the_next_start_brings_it_in)
{
    struct saver *saver = start();
    struct err err = {0};
    char away[80];
    (void)snprintf(away, sizeof away, "%s/away.case", live_folder);
    add(saver, 1);
    cr_assert(live_until(saver, live_all_saved));
    cr_assert_eq(rename(live_path, away), 0);
    for (int i = 0; i < 5; i++)
        add(saver, 2 + i);
    cr_expect_eq(stop(saver, 50, &err), ERR_IO);
    cr_expect(strstr(err.text, "6 changes") && strstr(err.text, "next start"), "%s", err.text);
    cr_expect(!strchr(err.text, '\n'));
    cr_assert_eq(rename(away, live_path), 0);
    cr_expect_eq(live_stored(), 1);
    /* This process stands for one that is gone: the file says another number. */
    char command[256];
    (void)snprintf(command, sizeof command, "find %s -name '*.lines' | wc -l > %s/n", live_folder,
                   live_folder);
    cr_assert_eq(system(command), 0);
    cr_expect_eq(files_waiting(), 1);
}

/* Lines in the second place, all files together. */
static int lines_waiting(void)
{
    char command[256];
    int lines = -1;
    (void)snprintf(command, sizeof command, "find %s -name '*.lines' -exec cat {} + | wc -l",
                   live_folder);
    FILE *pipe = popen(command, "r");
    cr_assert(pipe && fscanf(pipe, "%d", &lines) == 1);
    (void)pclose(pipe);
    return lines;
}

Test(saver, what_lies_in_the_second_place_is_not_put_there_again)
{
    struct saver *saver = start();
    struct err err = {0};
    char away[80];
    (void)snprintf(away, sizeof away, "%s/away.case", live_folder);
    add(saver, 1);
    cr_assert(live_until(saver, live_all_saved));
    cr_assert_eq(rename(live_path, away), 0);
    for (int i = 0; i < 20; i++) { /* attempts go on all the while */
        add(saver, 2 + i);
        cr_assert(live_until(saver, live_all_kept));
        (void)nanosleep(&(struct timespec){0, 2 * PAUSE_MS * NS_PER_MS}, NULL);
    }
    cr_expect_eq(lines_waiting(), 1 + 21, "a line for the session and one a change");
    cr_assert_eq(rename(away, live_path), 0);
    cr_assert(live_until(saver, live_all_saved));
    cr_assert_eq(stop(saver, 1000, &err), 0, "%s", err.text);
    cr_expect_eq(lines_waiting(), 0);
}

static const struct stored_stream one_stream = {"/tmp/x-live-1.bdf", "", "tcp:x:1", ""};

static size_t streams_noted(void)
{
    struct store *store = live_open();
    struct arena arena = {0};
    struct stored_stream *list;
    struct err err = {0};
    size_t count = 0;
    cr_assert_eq(store_streams(store, &arena, &list, &count, &err), 0, "%s", err.text);
    arena_free(&arena);
    store_close(store);
    return count;
}

Test(saver, a_stream_that_the_case_does_not_know_is_told_at_the_end)
{
    struct saver *saver = start();
    struct err err = {0};
    char away[80];
    (void)snprintf(away, sizeof away, "%s/away.case", live_folder);
    cr_assert_eq(rename(live_path, away), 0);
    cr_assert_eq(saver_stream(saver, &one_stream, &err), 0);
    cr_expect_eq(stop(saver, 50, &err), ERR_IO);
    cr_expect(strstr(err.text, "x-live-1.bdf is not noted") && strstr(err.text, "moved"), "%s",
              err.text);
    cr_assert_eq(rename(away, live_path), 0);
    cr_expect_eq(streams_noted(), 0);
}

Test(saver, a_stream_is_noted_again_in_a_case_that_was_put_back_from_a_copy)
{
    char copy[80], command[256];
    struct err err = {0};
    (void)snprintf(copy, sizeof copy, "%s/copy", live_folder);
    copy_case(copy);
    struct saver *saver = start();
    cr_assert_eq(saver_stream(saver, &one_stream, &err), 0);
    add(saver, 1);
    cr_assert(live_until(saver, live_all_saved));
    for (int i = 0; i < 3000 && streams_noted() == 0; i++)
        (void)nanosleep(&(struct timespec){0, 5 * NS_PER_MS}, NULL);
    (void)snprintf(command, sizeof command, "rm -f %s %s-wal %s-shm", live_path, live_path,
                   live_path);
    cr_assert_eq(system(command), 0);
    cr_assert(live_until(saver, live_all_kept));
    (void)snprintf(command, sizeof command, "cp %s %s", copy, live_path);
    cr_assert_eq(system(command), 0);
    cr_assert(live_until(saver, live_all_saved));
    cr_assert_eq(stop(saver, 1000, &err), 0, "%s", err.text);
    cr_expect_eq(streams_noted(), 1);
}

struct seen {
    int count;
    bool changed;
    int64_t as_of;
};

static void look(const struct mark *mark, int64_t as_of, void *context)
{
    struct seen *seen = context;
    seen->as_of = as_of;
    seen->count++;
    seen->changed = seen->changed || strcmp(mark->note, "by another") == 0;
}

Test(saver, shows_what_others_changed)
{
    struct saver *saver = start();
    struct err err = {0};
    struct seen seen = {0};
    add(saver, 1);
    cr_assert(live_until(saver, live_all_saved));
    struct store *other = live_open();
    const struct mark *marks;
    size_t count;
    cr_assert_eq(store_marks(other, &marks, &count, &err), 0);
    struct mark mark = marks[0];
    mark.note = "by another";
    cr_assert_eq(store_mark_change(other, &mark, "", &err), 0, "%s", err.text);
    for (int i = 0; i < 3000 && !seen.changed; i++) {
        seen.count = 0;
        (void)saver_marks(saver, look, &seen);
        (void)nanosleep(&(struct timespec){0, 5 * NS_PER_MS}, NULL);
    }
    cr_expect(seen.changed && seen.count == 1 && seen.as_of == 1);
    store_close(other);
    cr_assert_eq(stop(saver, 1000, &err), 0);
}
