/*
 * live_case.h - a case in a temporary folder with a second place of its own, and a live session on
 * it: for tests of saving. Include once a test file.
 */
#ifndef TESTS_LIVE_CASE_H
#define TESTS_LIVE_CASE_H

#include <criterion/criterion.h>

#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

#include "base/machine.h"
#include "store/saver.h"
#include "store/second_place.h"

static char live_folder[] = "/tmp/incisura-live-XXXXXX";
static char live_path[64];

static inline void live_case_set_up(void)
{
    static const struct case_header header = {.subject = "S-1",
                                              .rater = "KM",
                                              .codebook_text = "x",
                                              .codebook_size = 1,
                                              .epoch_civil_ns = NS_NONE};
    struct err err = {0};
    cr_assert_not_null(mkdtemp(live_folder));
    (void)snprintf(live_path, sizeof live_path, "%s/c.case", live_folder);
    cr_assert_eq(setenv("XDG_STATE_HOME", live_folder, 1), 0);
    cr_assert_eq(store_create(live_path, &header, &err), 0, "%s", err.text);
}

static inline void live_case_tear_down(void)
{
    char command[128];
    (void)snprintf(command, sizeof command, "rm -rf %s", live_folder);
    cr_expect_eq(system(command), 0);
}

/* A session of this process. */
static inline struct live_session live_session_here(void)
{
    struct live_session made = {.pid = getpid(),
                                .rater = "KM",
                                .begun_utc_ns = utc_now_ns(),
                                .epoch_civil_ns = 1000 * NS_PER_S,
                                .ended_utc_ns = NS_NONE};
    random_id(made.uid);
    host_name(made.host);
    machine_id(made.machine);
    boot_id(made.boot_id);
    made.process_start = process_start_ticks(made.pid);
    return made;
}

/* An incision at onset_ns, stamped, with a note. */
static inline struct live_change live_add(int64_t number, int64_t onset_ns, const char *note)
{
    return (struct live_change){.number = number,
                                .kind = LIVE_ADD,
                                .mark = {.code = "incision",
                                         .onset_ns = onset_ns,
                                         .until_ns = NS_NONE,
                                         .unit = "",
                                         .route = "",
                                         .note = note,
                                         .state = MARK_MARKED,
                                         .source = MARK_LIVE,
                                         .rater = "KM",
                                         .stamp_clock = "boottime x",
                                         .stamp_ns = onset_ns + 5,
                                         .stamp_utc_ns = onset_ns + 7},
                                .why = ""};
}

static inline struct store *live_open(void)
{
    struct store *store = NULL;
    struct err err = {0};
    cr_assert_eq(store_open(live_path, STORE_WRITE, NULL, &store, &err), 0, "%s", err.text);
    return store;
}

/* How many marks the case has, once it verifies. */
static inline size_t live_stored(void)
{
    struct store *store = live_open();
    struct err err = {0};
    const struct mark *marks;
    size_t count;
    int64_t rows, bad;
    cr_assert_eq(store_verify(store, &rows, &bad, NULL, &err), 0, "%s", err.text);
    cr_assert_eq(store_marks(store, &marks, &count, &err), 0);
    store_close(store);
    return count;
}

/* Waits until the saver says so; false after a long time. */
static inline bool live_until(struct saver *saver, bool (*good)(const struct saver_status *))
{
    for (int i = 0; i < 3000; i++) {
        struct saver_status status;
        saver_status(saver, &status);
        if (good(&status))
            return true;
        (void)nanosleep(&(struct timespec){0, 5 * NS_PER_MS}, NULL);
    }
    return false;
}

static inline bool live_all_saved(const struct saver_status *status)
{
    return status->saved == status->asked;
}

static inline bool live_all_kept(const struct saver_status *status)
{
    return status->failing && status->kept == status->asked;
}

#endif
