/*
 * test_saver_faults.c - a scripted live session on a disk that fails its Nth call, for every N,
 * once and from then on: every mark ends in the case, once, or waits in the second place, and is in
 * the case after the next start.
 */
#include "live_case.h"

#include <sys/wait.h>

#include "robustness/faulty_vfs.h"

enum { MARKS = 3, PAUSE_MS = 1, PATIENCE_MS = 5000 };

TestSuite(saver_faults, .init = live_case_set_up, .fini = live_case_tear_down);

/* Begins a session, stamps three marks, closes one. In a process of its own: the next start is
 * another process. Exits 0 when all was saved, 1 when it said that it was not. */
static void play(struct store *store)
{
    struct saver *saver = NULL;
    struct err err = {0};
    int64_t number;
    struct live_session session = live_session_here();
    if (saver_start(store, &session, PAUSE_MS, &saver, &err))
        _exit(2); /* the second place could not even be named: nothing was stamped */
    for (int i = 0; i < MARKS; i++) {
        struct live_change add = live_add(0, i, "");
        if (saver_change(saver, &add, &number, &err))
            _exit(3);
    }
    struct live_change change = live_add(0, 1, "closed");
    change.kind = LIVE_CHANGE;
    change.of_number = 2;
    if (saver_change(saver, &change, &number, &err))
        _exit(3);
    (void)live_until(saver, faulty_lasting && faulty_at > 0 ? live_all_kept : live_all_saved);
    _exit(saver_stop(saver, faulty_lasting ? 20 : PATIENCE_MS, &store, &err) ? 1 : 0);
}

static int run_session(int at, int *calls)
{
    int ends[2];
    cr_assert_eq(pipe(ends), 0);
    pid_t pid = fork();
    if (pid == 0) {
        faulty_install();
        struct store *store = live_open();
        faulty_calls = 0;
        faulty_at = at;
        if (at == 0) { /* count */
            struct saver *saver = NULL;
            struct err err = {0};
            struct live_session session = live_session_here();
            int64_t number;
            if (saver_start(store, &session, PAUSE_MS, &saver, &err))
                _exit(2);
            for (int i = 0; i < MARKS; i++) {
                struct live_change add = live_add(0, i, "");
                if (saver_change(saver, &add, &number, &err))
                    _exit(3);
            }
            (void)live_until(saver, live_all_saved);
            int failed = saver_stop(saver, PATIENCE_MS, &store, &err);
            if (write(ends[1], &faulty_calls, sizeof faulty_calls) != sizeof faulty_calls)
                failed = 1;
            _exit(failed);
        }
        play(store);
    }
    int status;
    (void)close(ends[1]);
    if (calls)
        cr_assert_eq(read(ends[0], calls, sizeof *calls), (ssize_t)sizeof *calls);
    (void)close(ends[0]);
    cr_assert_eq(waitpid(pid, &status, 0), pid);
    cr_assert(WIFEXITED(status), "call %d", at);
    return WEXITSTATUS(status);
}

static void check_after(int at, bool lasting, int status)
{
    struct store *store = live_open();
    struct err err = {0};
    const struct mark *marks;
    int64_t taken, damaged;
    size_t count;
    cr_assert_eq(second_place_take(store, &taken, &damaged, &err), 0, "%s", err.text);
    cr_expect_eq(damaged, 0);
    cr_assert_eq(store_marks(store, &marks, &count, &err), 0);
    if (status != 2) {
        cr_expect_eq(count, (size_t)MARKS, "call %d %s: %zu marks, %d from the second place", at,
                     lasting ? "and on" : "once", count, (int)taken);
        for (size_t i = 0; i < count; i++)
            cr_expect_eq(strcmp(marks[i].note, "closed") == 0, marks[i].onset_ns == 1);
    }
    store_close(store);
    cr_expect_eq(live_stored(), status == 2 ? 0 : (size_t)MARKS);
}

Test(saver_faults, every_failing_call)
{
    int total = 0;
    cr_assert_eq(run_session(0, &total), 0);
    cr_expect_gt(total, 20);
    for (int mode = 0; mode < 2; mode++) {
        faulty_lasting = mode == 1;
        for (int at = 1; at <= total; at++) {
            char command[256];
            (void)snprintf(command, sizeof command, "rm -rf %s", live_folder);
            cr_assert_eq(system(command), 0);
            (void)snprintf(live_folder, sizeof live_folder, "/tmp/incisura-live-XXXXXX");
            live_case_set_up();
            check_after(at, faulty_lasting, run_session(at, NULL));
        }
    }
}
