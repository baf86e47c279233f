/*
 * bench_live.c - what a live stream costs: 64 channels at 1 kHz as BDF+ from a FIFO, played in real
 * time. Prints the share of a core and the memory; asserts nothing.
 *
 *   bench_live FOLDER SECONDS RECORD_MS
 */
#include <fcntl.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/resource.h>
#include <sys/stat.h>
#include <sys/wait.h>
#include <time.h>
#include <unistd.h>

#include "base/file.h"
#include "base/ns.h"
#include "case/live_stream.h"
#include "recording/edf_writer.h"

enum { CHANNELS = 64, RATE_HZ = 1000 };

static double now_s(void)
{
    struct timespec now;
    (void)clock_gettime(CLOCK_MONOTONIC, &now);
    return (double)now.tv_sec + 1e-9 * (double)now.tv_nsec;
}

static void fail(const struct err *err)
{
    (void)fprintf(stderr, "bench_live: %s\n", err->text);
    exit(2);
}

static void write_source(const char *path, int seconds, int record_ms)
{
    static char labels[CHANNELS][8];
    static struct edf_channel_spec channels[CHANNELS];
    static float record[CHANNELS * RATE_HZ];
    int samples = RATE_HZ * record_ms / 1000;
    for (int i = 0; i < CHANNELS; i++) {
        (void)snprintf(labels[i], sizeof labels[i], "EEG %d", i + 1);
        channels[i] =
            (struct edf_channel_spec){labels[i], "uV", "", "", -5000, 5000, 0, 0, samples};
    }
    struct edf_spec spec = {.bdf = true,
                            .start_civil_ns = 1937033700000000000,
                            .record_ns = record_ms * NS_PER_MS,
                            .channels = channels,
                            .channel_count = CHANNELS};
    struct edf_writer *writer = NULL;
    struct err err = {0};
    if (edf_writer_open(path, &spec, &writer, &err))
        fail(&err);
    for (int at = 0; at < seconds * 1000 / record_ms; at++) {
        for (int i = 0; i < CHANNELS * samples; i++)
            record[i] = 1000 * sinf((float)(at * samples + i % samples) * 0.01f + (float)i);
        if (edf_writer_record(writer, 0, record, &err))
            fail(&err);
    }
    if (edf_writer_close(writer, &err))
        fail(&err);
}

/* The file's bytes into the FIFO, each record when its time has come. */
static void play(const char *source, const char *fifo, int record_ms)
{
    struct mapped file;
    struct err err = {0};
    if (disk_files.map(&disk_files, source, &file, &err))
        fail(&err);
    size_t header = 256 * (CHANNELS + 2);
    size_t record = (size_t)(CHANNELS * RATE_HZ * record_ms / 1000 * 3 + 120);
    int fd = open(fifo, O_WRONLY);
    double began = now_s();
    int count = 0;
    for (size_t at = 0; fd >= 0 && at < file.size; count++) {
        size_t size = at == 0 ? header : record;
        for (size_t done = 0; done < size;) {
            ssize_t wrote = write(fd, file.data + at + done, size - done);
            if (wrote <= 0)
                _exit(1);
            done += (size_t)wrote;
        }
        at += size;
        double left = began + (double)count * record_ms / 1000 - now_s();
        if (left > 0)
            (void)nanosleep(&(struct timespec){(time_t)left, (long)(fmod(left, 1) * 1e9)}, NULL);
    }
    _exit(0);
}

static double cpu_s(void)
{
    struct rusage use;
    (void)getrusage(RUSAGE_SELF, &use);
    return (double)use.ru_utime.tv_sec + (double)use.ru_stime.tv_sec +
           1e-6 * (double)(use.ru_utime.tv_usec + use.ru_stime.tv_usec);
}

static double resident_mb(void)
{
    long pages = 0;
    FILE *file = fopen("/proc/self/statm", "r");
    if (file) {
        if (fscanf(file, "%*d %ld", &pages) != 1)
            pages = 0;
        (void)fclose(file);
    }
    return (double)pages * 4096 / 1e6;
}

static void measure(struct live_stream *stream, int seconds)
{
    struct live_status status;
    double began = now_s(), cpu = cpu_s(), first_mb = 0;
    for (int second = 1; second <= seconds; second++) {
        double left = began + second - now_s();
        if (left > 0)
            (void)nanosleep(&(struct timespec){(time_t)left, (long)(fmod(left, 1) * 1e9)}, NULL);
        if (second == seconds / 4)
            first_mb = resident_mb();
    }
    double share = 100 * (cpu_s() - cpu) / (now_s() - began);
    live_stream_status(stream, &status);
    (void)printf("live stream, %d channels x %d Hz: %.1f %% of a core, %.1f MB after a quarter, "
                 "%.1f MB at the end; %lld samples, %lld dropped, %lld garbled, %.1f s wait\n",
                 CHANNELS, RATE_HZ, share, first_mb, resident_mb(), (long long)status.samples,
                 (long long)status.dropped, (long long)status.garbled,
                 s_from_ns(status.waiting_ns));
}

int main(int count, char **arguments)
{
    if (count < 4) {
        (void)fprintf(stderr, "bench_live FOLDER SECONDS RECORD_MS\n");
        return 2;
    }
    char source[512], fifo[512], text[520];
    int seconds = atoi(arguments[2]), record_ms = atoi(arguments[3]);
    (void)snprintf(source, sizeof source, "%s/device-%d.bdf", arguments[1], record_ms);
    (void)snprintf(fifo, sizeof fifo, "%s/pipe-%d", arguments[1], record_ms);
    (void)snprintf(text, sizeof text, "fifo:%s", fifo);
    write_source(source, seconds, record_ms);
    if (mkfifo(fifo, 0600) < 0) {
        perror(fifo);
        return 2;
    }
    pid_t player = fork();
    if (player == 0)
        play(source, fifo, record_ms);
    struct live_stream_config config = {
        .source = text, .folder = arguments[1], .stem = "bench", .subject = "S"};
    struct live_stream *stream = NULL;
    struct err err = {0};
    if (live_stream_start(&config, &stream, &err))
        fail(&err);
    measure(stream, seconds);
    if (live_stream_stop(stream, 10000, &err))
        fail(&err);
    live_stream_free(stream);
    (void)waitpid(player, NULL, 0);
    return 0;
}
