/*
 * bench_overview.c - building and asking the overview, against a plain min-max loop over the same
 * mapped bytes. Prints figures; asserts none.
 *
 *   bench_overview FILE.bdf CACHE
 */
#include <stdio.h>
#include <stdlib.h>
#include <time.h>
#include <unistd.h>

#include "base/file.h"
#include "recording/recording.h"
#include "trace/overview.h"

enum { CHANNELS = 32, RECORD_SAMPLES = 1000, QUERIES = 2000 };

static const char digest[] = "00112233445566778899aabbccddeeff00112233445566778899aabbccddeeff";

static double now_s(void)
{
    struct timespec now;
    (void)clock_gettime(CLOCK_MONOTONIC, &now);
    return (double)now.tv_sec + 1e-9 * (double)now.tv_nsec;
}

static void fail(const struct err *err)
{
    (void)fprintf(stderr, "bench_overview: %s\n", err->text);
    exit(2);
}

/* What anyone would write: every sample of the file once, least and greatest a channel. */
static double plain_loop(const char *path)
{
    struct mapped file;
    struct err err = {0};
    int32_t low[CHANNELS], high[CHANNELS];
    if (disk_files.map(&disk_files, path, &file, &err))
        fail(&err);
    for (int c = 0; c < CHANNELS; c++) {
        low[c] = INT32_MAX;
        high[c] = INT32_MIN;
    }
    double began = now_s();
    const uint8_t *at = file.data + 256 * (CHANNELS + 1), *end = file.data + file.size;
    while (at + CHANNELS * RECORD_SAMPLES * 3 <= end) {
        for (int c = 0; c < CHANNELS; c++) {
            int32_t least = low[c], most = high[c];
            for (int i = 0; i < RECORD_SAMPLES; i++, at += 3) {
                uint32_t bits =
                    (uint32_t)at[0] << 8 | (uint32_t)at[1] << 16 | (uint32_t)at[2] << 24;
                int32_t value = (int32_t)bits >> 8;
                least = value < least ? value : least;
                most = value > most ? value : most;
            }
            low[c] = least;
            high[c] = most;
        }
    }
    double took = now_s() - began;
    (void)printf("plain min-max loop                 %8.3f s   (channel 1: %d..%d)\n", took, low[0],
                 high[0]);
    disk_files.unmap(&disk_files, &file);
    return took;
}

static struct overview *open_overview(const struct recording *recording, const char *cache,
                                      int threads)
{
    struct overview *overview = NULL;
    struct err err = {0};
    if (overview_open(recording, digest, cache, threads, &overview, &err))
        fail(&err);
    return overview;
}

static struct recording *open_recording(const char *path)
{
    const struct reader_options usual = {0};
    struct recording *recording = NULL;
    struct err err = {0};
    if (recording_open(path, &usual, &recording, &err))
        fail(&err);
    return recording;
}

/* On a fresh mapping, as the plain loop has it: both pay for its page faults. */
static void build(const char *path, int threads, double plain_s)
{
    struct recording *recording = open_recording(path);
    double began = now_s();
    struct overview *overview = open_overview(recording, NULL, threads);
    overview_wait(overview);
    double took = now_s() - began;
    overview_close(overview);
    recording_close(recording);
    (void)printf("overview by %d thread%s              %8.3f s   %.2f x the plain loop\n", threads,
                 threads == 1 ? " " : "s", took, took / plain_s);
}

static void reopen(const struct recording *recording, const char *cache)
{
    (void)unlink(cache);
    struct overview *overview = open_overview(recording, cache, 2);
    double began = now_s();
    overview_close(overview);
    (void)printf("closed while building              %8.2f ms\n", 1e3 * (now_s() - began));
    overview = open_overview(recording, cache, 2);
    overview_wait(overview);
    overview_close(overview);
    began = now_s();
    overview = open_overview(recording, cache, 2);
    double opened = now_s();
    overview_wait(overview);
    (void)printf("opened from its file               %8.2f ms  and checked after %.2f ms\n",
                 1e3 * (opened - began), 1e3 * (now_s() - began));
    overview_close(overview);
    (void)unlink(cache);
}

static void ask(const struct recording *recording)
{
    struct overview *overview = open_overview(recording, NULL, 2);
    int64_t samples = recording_info(recording)->channels[0].samples;
    overview_wait(overview);
    (void)printf("asking for a stretch:  samples       mean us      worst us\n");
    srand(1);
    for (int64_t count = 1; count <= samples; count *= 8) {
        double worst = 0, began = now_s();
        for (int i = 0; i < QUERIES; i++) {
            float low, high;
            int64_t first = (int64_t)((double)rand() / RAND_MAX * (double)(samples - count));
            double before = now_s();
            (void)overview_minmax(overview, (size_t)(i % CHANNELS), first, count, &low, &high);
            double took = now_s() - before;
            worst = took > worst ? took : worst;
        }
        (void)printf("%30lld  %12.3f  %12.3f\n", (long long)count,
                     1e6 * (now_s() - began) / QUERIES, 1e6 * worst);
    }
    overview_close(overview);
}

int main(int argc, char **argv)
{
    if (argc < 3) {
        (void)fprintf(stderr, "bench_overview: write bench_overview FILE.bdf CACHE\n");
        return 2;
    }
    (void)plain_loop(argv[1]); /* brings the file into the page cache */
    double plain_s = plain_loop(argv[1]);
    build(argv[1], 1, plain_s);
    build(argv[1], 2, plain_s);
    double began = now_s();
    struct recording *recording = open_recording(argv[1]);
    (void)printf("recording opened                   %8.2f ms\n", 1e3 * (now_s() - began));
    reopen(recording, argv[2]);
    ask(recording);
    recording_close(recording);
    return 0;
}
