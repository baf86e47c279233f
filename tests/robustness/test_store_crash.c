/*
 * test_store_crash.c - marks against kill -9, a full disk and a disk that fails: what was said to
 * be stored is there, and the history verifies.
 */
#include <criterion/criterion.h>

#include <errno.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/resource.h>
#include <sys/wait.h>
#include <time.h>
#include <unistd.h>

#include "robustness/faulty_vfs.h"
#include "store/store.h"

static char folder[] = "/tmp/incisura-crash-XXXXXX";
static char path[64];

static int create(struct err *err)
{
    static const struct case_header header = {
        .subject = "S-1", .rater = "KM", .codebook_text = "x", .codebook_size = 1};
    return store_create(path, &header, err);
}

static void set_up(void)
{
    cr_assert_not_null(mkdtemp(folder));
    (void)snprintf(path, sizeof path, "%s/c.case", folder);
}

static void tear_down(void)
{
    char command[128];
    (void)snprintf(command, sizeof command, "rm -rf %s", folder);
    cr_expect_eq(system(command), 0);
}

TestSuite(store_crash, .init = set_up, .fini = tear_down, .timeout = 120);

static int add(struct store *store, int64_t onset_ns, const char *note, int64_t *id,
               struct err *err)
{
    struct mark mark = {.code = "incision",
                        .onset_ns = onset_ns,
                        .until_ns = NS_NONE,
                        .unit = "",
                        .route = "",
                        .note = note,
                        .state = MARK_MARKED,
                        .stamp_clock = "",
                        .stamp_ns = NS_NONE,
                        .stamp_utc_ns = NS_NONE};
    return store_mark_add(store, &mark, "", id, err);
}

/* Ids stored, and whether the whole verifies. */
static int64_t stored(int64_t *greatest)
{
    struct store *store = NULL;
    struct err err = {0};
    const struct mark *marks;
    size_t count;
    int64_t rows, bad;
    cr_assert_eq(store_open(path, STORE_WRITE, NULL, &store, &err), 0, "%s", err.text);
    cr_assert_eq(store_verify(store, &rows, &bad, NULL, &err), 0, "%s", err.text);
    cr_assert_eq(store_marks(store, &marks, &count, &err), 0);
    *greatest = 0;
    for (size_t i = 0; i < count; i++)
        *greatest = marks[i].id > *greatest ? marks[i].id : *greatest;
    store_close(store);
    return (int64_t)count;
}

/* Adds marks for ever and says each id once it is stored. */
static void child(int to)
{
    struct store *store = NULL;
    int64_t id;
    if (store_open(path, STORE_WRITE, NULL, &store, NULL))
        _exit(3);
    for (int64_t i = 0; add(store, i, "", &id, NULL) == 0; i++) {
        if (write(to, &id, sizeof id) != sizeof id)
            _exit(4);
    }
    _exit(5);
}

Test(store_crash, killed_at_any_instant)
{
    enum { ROUNDS = 60 };
    struct err err = {0};
    int64_t told = 0;
    uint32_t state = 7;
    cr_assert_eq(create(&err), 0);
    for (int round = 0; round < ROUNDS; round++) {
        int ends[2];
        int64_t id, greatest;
        cr_assert_eq(pipe(ends), 0);
        pid_t pid = fork();
        if (pid == 0)
            child(ends[1]);
        (void)close(ends[1]);
        state = state * 1664525u + 1013904223u;
        (void)nanosleep(&(struct timespec){0, (long)(state % 60000000u)}, NULL);
        cr_assert_eq(kill(pid, SIGKILL), 0);
        (void)waitpid(pid, NULL, 0);
        while (read(ends[0], &id, sizeof id) == sizeof id)
            told = id;
        (void)close(ends[0]);
        int64_t count = stored(&greatest);
        cr_assert_geq(greatest, told, "round %d: a mark that was told is gone", round);
        cr_assert_eq(count, greatest, "round %d: a hole", round);
    }
    cr_expect_gt(told, 0, "some marks were stored at all");
}

Test(store_crash, a_full_disk_loses_nothing_that_was_stored)
{
    static char note[2000];
    struct err err = {0};
    struct store *store = NULL;
    int64_t id = 0, told = 0, greatest;
    memset(note, 'x', sizeof note - 1);
    cr_assert_eq(create(&err), 0);
    cr_assert_eq(store_open(path, STORE_WRITE, NULL, &store, &err), 0);
    (void)signal(SIGXFSZ, SIG_IGN);
    struct rlimit limit = {400000, RLIM_INFINITY};
    cr_assert_eq(setrlimit(RLIMIT_FSIZE, &limit), 0);
    while (add(store, told, note, &id, &err) == 0)
        told = id;
    cr_expect_gt(told, 10);
    cr_expect(strstr(err.text, "c.case") && !strchr(err.text, '\n'), "%s", err.text);
    limit.rlim_cur = RLIM_INFINITY;
    cr_assert_eq(setrlimit(RLIMIT_FSIZE, &limit), 0);
    cr_assert_eq(add(store, told, note, &id, &err), 0, "room again, works again: %s", err.text);
    store_close(store);
    cr_expect_eq(stored(&greatest), told + 1);
}

/* ---- a disk that fails the Nth call ---- */

/* Create, add two, change, undo; returns how many marks were said to be stored. */
static int64_t session(void)
{
    struct store *store = NULL;
    struct err err = {0};
    int64_t told = 0, id;
    const struct mark *marks;
    size_t count;
    bool done;
    if (create(&err) == 0 && store_open(path, STORE_WRITE, NULL, &store, &err) == 0) {
        for (int i = 0; i < 2; i++)
            told += add(store, i, "", &id, &err) == 0;
        if (store_marks(store, &marks, &count, &err) == 0 && count > 0) {
            struct mark changed = marks[0];
            changed.note = "changed";
            if (store_mark_change(store, &changed, "", &err) == 0)
                (void)!store_undo(store, &done, NULL, 0, &err);
        }
    }
    cr_assert(!err.code || !strchr(err.text, '\n'));
    store_close(store);
    return told;
}

Test(store_crash, every_failing_call)
{
    faulty_install();
    for (int mode = 0; mode < 2; mode++) {
        faulty_lasting = mode == 1;
        int total = 1;
        for (faulty_at = 0; faulty_at <= total; faulty_at++) {
            int64_t greatest;
            faulty_calls = 0;
            int64_t told = session();
            if (faulty_at == 0)
                total = faulty_calls; /* the first run, without a fault, counts them */
            int at = faulty_at;
            faulty_at = 0;
            if (access(path, F_OK) == 0) {
                int64_t count = stored(&greatest);
                cr_assert_geq(count, told, "call %d of %d: told %d, stored %d", at, total,
                              (int)told, (int)count);
            } else {
                cr_assert_eq(told, 0);
            }
            char command[128];
            (void)snprintf(command, sizeof command, "rm -f %s*", path);
            cr_assert_eq(system(command), 0);
            faulty_at = at;
        }
        cr_expect_gt(total, 30, "calls that can fail: %d", total);
    }
}
