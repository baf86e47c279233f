/*
 * test_live_faults.c - a live stream whose disk is full, whose memory is bounded, whose bytes come
 * in bursts, and whose process is killed: nothing is lost that could be kept, and what is lost is
 * counted.
 */
#include <criterion/criterion.h>

#include <edflib.h>
#include <math.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/prctl.h>
#include <sys/resource.h>
#include <sys/stat.h>
#include <sys/wait.h>
#include <time.h>
#include <unistd.h>

#include "live_feed.h"
#include "recording/edf_repair.h"

TestSuite(live_faults, .init = feed_set_up, .fini = feed_tear_down);

static const struct stream_channel channels[] = {
    {"ECG II", "mV", ROLE_ECG, "", "", 0, 0, 0, 0, 100},
    {"EDA", "uS", ROLE_EDA, "", "", 0, 0, 0, 0, 10},
};
static const struct stream_header header = {channels, 2, NS_PER_S, 1};

static const double ecg_step = 40.0 / 16777215;

/* The disk has room for so many bytes of a file. */
static void set_room(rlim_t bytes)
{
    struct rlimit limit = {bytes, RLIM_INFINITY};
    (void)signal(SIGXFSZ, SIG_IGN);
    cr_assert_eq(setrlimit(RLIMIT_FSIZE, &limit), 0);
}

/* Fills the disk and waits until the writer has met it. */
static void fill_disk(struct feed *feed)
{
    struct stat status;
    feed_wait_written(feed);
    cr_assert_eq(stat(feed_path(1), &status), 0);
    set_room((rlim_t)status.st_size + 100);
    feed_blocks(feed, 1);
    for (int i = 0; i < 3000 && !*feed_status(feed).trouble; i++)
        (void)nanosleep(&(struct timespec){0, 10000000}, NULL);
    const struct live_status now = feed_status(feed);
    cr_assert(strstr(now.trouble, "case-live-1.bdf") && !strchr(now.trouble, '\n'), "'%s'",
              now.trouble);
}

/* Every sample of a channel as it was fed, `blocks` of them. */
static void expect_fed(const struct trace *trace, size_t channel, int64_t blocks)
{
    int64_t count = blocks * channels[channel].samples;
    float *got = malloc((size_t)count * sizeof *got);
    struct err err = {0};
    cr_assert_eq(trace->samples, count);
    cr_assert_eq(trace_read(trace, 0, count, got, &err), 0, "%s", err.text);
    for (int64_t k = 0; k < count; k++) {
        float want = feed_value(channel, k);
        cr_assert((isnan(want) && isnan(got[k])) ||
                      fabs((double)want - (double)got[k]) <= (channel ? 1e-4 : ecg_step),
                  "sample %lld: %g, not %g", (long long)k, (double)got[k], (double)want);
    }
    free(got);
}

Test(live_faults, a_disk_that_is_full_for_a_while_loses_nothing)
{
    struct feed feed = feed_start();
    feed_header(&feed, &header);
    feed_blocks(&feed, 20);
    fill_disk(&feed);
    feed_blocks(&feed, 300); /* far more than the screen's memory holds */
    cr_expect_gt(feed_status(&feed).waiting_ns, 300 * NS_PER_S);
    for (size_t i = 0; i < 2; i++)
        expect_fed(feed_trace(&feed, i, NULL), i, 321);
    set_room(RLIM_INFINITY);
    feed_wait_written(&feed);
    cr_expect_str_eq(feed_status(&feed).trouble, "");
    cr_expect_eq(feed_status(&feed).dropped, 0);
    feed_blocks(&feed, 10);
    feed_stop(&feed);
    struct recording *recording = feed_open(1);
    cr_expect_eq(recording_info(recording)->gap_count, 0);
    for (size_t i = 0; i < 2; i++) {
        expect_fed(feed_trace(&feed, i, NULL), i, 331);
        feed_expect_same(feed_trace(&feed, i, NULL), recording, i, 1e-4);
    }
    recording_close(recording);
    live_stream_free(feed.stream);
}

Test(live_faults, a_folder_that_cannot_be_written_is_tried_again)
{
    char moved[96];
    (void)snprintf(moved, sizeof moved, "%s-moved", feed_folder);
    struct feed feed = feed_start();
    cr_assert_eq(rename(feed_folder, moved), 0);
    feed_header(&feed, &header);
    feed_blocks(&feed, 100);
    for (int i = 0; i < 3000 && !*feed_status(&feed).trouble; i++)
        (void)nanosleep(&(struct timespec){0, 10000000}, NULL);
    cr_expect_neq(feed_status(&feed).trouble[0], '\0');
    expect_fed(feed_trace(&feed, 0, NULL), 0, 100);
    cr_assert_eq(rename(moved, feed_folder), 0);
    feed_stop(&feed);
    struct recording *recording = feed_open(1);
    feed_expect_same(feed_trace(&feed, 0, NULL), recording, 0, ecg_step);
    recording_close(recording);
    live_stream_free(feed.stream);
}

Test(live_faults, what_memory_cannot_keep_is_dropped_counted_and_missing)
{
    struct feed feed = feed_start();
    struct err err = {0};
    float got[100];
    feed.stream->queue.most_bytes = 100000;
    feed_header(&feed, &header);
    feed_blocks(&feed, 20);
    fill_disk(&feed);
    feed_blocks(&feed, 400);
    int64_t dropped = feed_status(&feed).dropped;
    cr_assert(dropped > 0 && dropped < 40000, "%lld dropped", (long long)dropped);
    set_room(RLIM_INFINITY);
    feed_wait_written(&feed);
    feed_blocks(&feed, 5);
    feed_stop(&feed);
    struct recording *recording = feed_open(1);
    const struct channel *ecg = &recording_info(recording)->channels[0];
    cr_expect_eq(ecg->samples, 426 * 100, "what was dropped has its place");
    cr_expect_eq(ecg->run_count, 1);
    int64_t missing = 0;
    for (int64_t at = 0; at < ecg->samples; at += 100) {
        cr_assert_eq(recording_read(recording, 0, at, 100, got, &err), 0);
        for (int64_t k = at; k < at + 100; k++) {
            missing += isnan(got[k - at]) && !isnan(feed_value(0, k));
            if (!isnan(got[k - at]))
                cr_assert_float_eq((double)got[k - at], (double)feed_value(0, k), ecg_step);
        }
    }
    cr_expect(missing > 0 && missing <= dropped && missing > dropped * 9 / 10,
              "%lld missing of %lld dropped", (long long)missing, (long long)dropped);
    cr_assert_eq(trace_read(feed_trace(&feed, 0, NULL), 300 * 100, 100, got, &err), 0, "%s",
                 err.text);
    recording_close(recording);
    live_stream_free(feed.stream);
}

static int64_t now_ns(void)
{
    struct timespec now;
    cr_assert_eq(clock_gettime(CLOCK_MONOTONIC, &now), 0);
    return now.tv_sec * NS_PER_S + now.tv_nsec;
}

Test(live_faults, stopping_while_the_disk_is_full_says_what_is_lost)
{
    struct feed feed = feed_start();
    struct live_part part;
    struct err err = {0};
    float sample;
    feed_header(&feed, &header);
    feed_blocks(&feed, 20);
    fill_disk(&feed);
    feed_blocks(&feed, 5);
    int64_t began_ns = now_ns();
    cr_expect_eq(live_stream_stop(feed.stream, 500, &err), ERR_IO);
    /* The limit is the machine's, not the program's: a call that ignored wait_ms would hang. */
    cr_expect_lt(now_ns() - began_ns, 30 * NS_PER_S);
    cr_expect(strstr(err.text, "not written") && strstr(err.text, "case-live-1.bdf") &&
                  !strchr(err.text, '\n'),
              "%s", err.text);
    cr_assert_eq(live_stream_part(feed.stream, 0, &part, &err), 0);
    cr_expect_not(part.closed);
    cr_assert_eq(trace_read(feed_trace(&feed, 0, NULL), 2599, 1, &sample, &err), 0,
                 "its samples stay readable");
    live_stream_free(feed.stream);
    set_room(RLIM_INFINITY);
    cr_assert_eq(edf_repair(feed_path(1), &err), 0, "%s", err.text);
    struct recording *recording = feed_open(1);
    cr_expect_geq(recording_info(recording)->channels[0].samples, 2000);
    cr_expect_eq(recording_info(recording)->note_count, 0);
    recording_close(recording);
}

/* Ten times as fast as it could be played, all of it in one read. */
Test(live_faults, a_burst_is_taken_whole)
{
    static float block[110];
    struct feed feed = feed_start();
    struct err err = {0};
    feed_header(&feed, &header);
    feed_blocks(&feed, 10);
    live_intake_read(&feed.stream->intake, feed.came_ns);
    for (int64_t b = 10; b < 3000; b++) {
        for (int k = 0; k < 110; k++)
            block[k] = k < 100 ? feed_value(0, b * 100 + k) : feed_value(1, b * 10 + k - 100);
        cr_assert_eq(feed.sink.block(feed.sink.context, NS_NONE, block, &err), 0);
    }
    cr_assert_eq(live_intake_flush(&feed.stream->intake, &err), 0);
    for (size_t i = 0; i < 2; i++)
        expect_fed(feed_trace(&feed, i, NULL), i, 3000);
    cr_expect_eq(feed_status(&feed).dropped, 0);
    feed_stop(&feed);
    struct recording *recording = feed_open(1);
    feed_expect_same(feed_trace(&feed, 0, NULL), recording, 0, ecg_step);
    recording_close(recording);
    live_stream_free(feed.stream);
}

/* ---- kill -9 ---- */

/* Feeds for ever, no faster than the disk takes it, and says how many blocks are in the file. */
static void child(int to)
{
    (void)prctl(PR_SET_PDEATHSIG, SIGKILL); /* should the parent fail */
    struct feed feed = feed_start();
    feed_header(&feed, &header);
    for (;;) {
        feed_blocks(&feed, 1 + feed.blocks % 3);
        while (feed_status(&feed).waiting_ns > 0)
            (void)nanosleep(&(struct timespec){0, 100000}, NULL);
        if (write(to, &feed.blocks, sizeof feed.blocks) != sizeof feed.blocks)
            _exit(4);
    }
}

Test(live_faults, killed_at_any_instant)
{
    enum { ROUNDS = 25 };
    uint32_t state = 7;
    int64_t most = 0;
    for (int round = 0; round < ROUNDS; round++) {
        int ends[2];
        int64_t told = 0, fed;
        struct err err = {0};
        struct edf_hdr_struct found;
        cr_assert_eq(pipe(ends), 0);
        pid_t pid = fork();
        cr_assert_geq(pid, 0);
        if (pid == 0)
            child(ends[1]);
        (void)close(ends[1]);
        /* Not before something was said: else there may be no file yet. */
        cr_assert_eq(read(ends[0], &told, sizeof told), (ssize_t)sizeof told);
        state = state * 1664525u + 1013904223u;
        (void)nanosleep(&(struct timespec){0, (long)(state % 40000000u)}, NULL);
        cr_assert_eq(kill(pid, SIGKILL), 0);
        (void)waitpid(pid, NULL, 0);
        while (read(ends[0], &fed, sizeof fed) == (ssize_t)sizeof fed)
            told = fed;
        (void)close(ends[0]);
        cr_assert_eq(edf_repair(feed_path(1), &err), 0, "%s", err.text);
        cr_assert_eq(edfopen_file_readonly(feed_path(1), &found, EDFLIB_READ_ALL_ANNOTATIONS), 0,
                     "round %d: %d", round, found.filetype);
        int64_t samples = found.signalparam[0].smp_in_file;
        cr_assert_geq(samples, told * 100, "round %d: %lld of %lld s", round,
                      (long long)samples / 100, (long long)told);
        double *got = malloc((size_t)samples * sizeof *got);
        cr_assert_eq(edfread_physical_samples(found.handle, 0, (int)samples, got), samples);
        for (int64_t k = 0; k < samples; k++) {
            float want = feed_value(0, k);
            cr_assert_float_eq(got[k], isnan(want) ? -20 : (double)want, ecg_step);
        }
        free(got);
        (void)edfclose_file(found.handle);
        (void)unlink(feed_path(1));
        most = told > most ? told : most;
    }
    cr_expect_gt(most, 1);
}
