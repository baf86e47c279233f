/*
 * bench_saver.c - from asking for a mark to its being durable, against what the disk itself takes
 * for a flush of one block.
 *
 *   bench_saver FOLDER
 */
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

#include "base/machine.h"
#include "store/saver.h"

enum { ROUNDS = 1000, BLOCK = 4096, EVERY_MS = 10 };

static int by_value(const void *a, const void *b)
{
    const int64_t *x = a, *y = b;
    return (*x > *y) - (*x < *y);
}

static void tell(const char *what, int64_t *ns)
{
    qsort(ns, ROUNDS, sizeof *ns, by_value);
    printf("%-34s p50 %8.3f ms   p99 %8.3f ms   worst %8.3f ms\n", what,
           (double)ns[ROUNDS / 2] / 1e6, (double)ns[ROUNDS * 99 / 100] / 1e6,
           (double)ns[ROUNDS - 1] / 1e6);
}

static void pause_a_little(void)
{
    (void)nanosleep(&(struct timespec){0, EVERY_MS * NS_PER_MS}, NULL);
}

static int bench_disk(const char *path, int64_t *ns)
{
    static char block[BLOCK];
    int fd = open(path, O_RDWR | O_CREAT | O_TRUNC, 0600);
    if (fd < 0)
        return 1;
    for (int i = 0; i < ROUNDS; i++) {
        int64_t before = boottime_now_ns();
        if (write(fd, block, BLOCK) != BLOCK || fdatasync(fd) < 0)
            return 1;
        ns[i] = boottime_now_ns() - before;
        pause_a_little();
    }
    return close(fd) + unlink(path);
}

static int bench_saver(const char *path, int64_t *ns, struct err *err)
{
    static int64_t asked[ROUNDS], numbers[ROUNDS];
    const struct case_header header = {.subject = "S-1",
                                       .rater = "KM",
                                       .codebook_text = "x",
                                       .codebook_size = 1,
                                       .epoch_civil_ns = NS_NONE};
    struct live_session session = {.pid = getpid(), .rater = "KM", .epoch_civil_ns = 0};
    struct store *store = NULL;
    struct saver *saver = NULL;
    session.ended_utc_ns = NS_NONE;
    random_id(session.uid);
    host_name(session.host);
    machine_id(session.machine);
    boot_id(session.boot_id);
    session.process_start = process_start_ticks(session.pid);
    (void)unlink(path);
    int failed = store_create(path, &header, err);
    if (!failed)
        failed = store_open(path, STORE_WRITE, NULL, &store, err);
    if (!failed)
        failed = saver_start(store, &session, SAVER_PAUSE_MS, &saver, err);
    for (int i = 0; i < ROUNDS && !failed; i++) {
        struct live_change change = {.kind = LIVE_ADD,
                                     .mark = {.code = "incision",
                                              .onset_ns = i,
                                              .until_ns = NS_NONE,
                                              .state = MARK_MARKED,
                                              .source = MARK_LIVE,
                                              .stamp_clock = "boottime",
                                              .stamp_ns = i,
                                              .stamp_utc_ns = i},
                                     .why = ""};
        asked[i] = boottime_now_ns();
        failed = saver_change(saver, &change, &numbers[i], err);
        pause_a_little();
    }
    struct saver_status status = {.asked = 1};
    while (!failed && status.saved < status.asked) {
        pause_a_little();
        saver_status(saver, &status);
    }
    for (int i = 0; i < ROUNDS && !failed; i++)
        ns[i] = saver_durable_ns(saver, numbers[i]) - asked[i];
    if (!failed)
        failed = saver_stop(saver, 1000, &store, err);
    store_close(store);
    return failed;
}

int main(int argc, char **argv)
{
    static int64_t ns[ROUNDS];
    char path[512];
    struct err err = {0};
    if (argc != 2)
        return 2;
    (void)snprintf(path, sizeof path, "%s/saver.block", argv[1]);
    if (bench_disk(path, ns)) {
        (void)fprintf(stderr, "bench_saver: %s cannot be written\n", path);
        return 2;
    }
    tell("one block and fdatasync", ns);
    (void)snprintf(path, sizeof path, "%s/saver.case", argv[1]);
    if (bench_saver(path, ns, &err)) {
        (void)fprintf(stderr, "bench_saver: %s\n", err.text);
        return 2;
    }
    tell("mark asked for to durable", ns);
    return unlink(path);
}
