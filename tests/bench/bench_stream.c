/*
 * bench_stream.c - the stream parser alone on what 64 channels at 1 kHz send: lines, and BDF
 * records. Prints figures; asserts none.
 *
 *   bench_stream FOLDER
 */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <time.h>
#include <unistd.h>

#include "base/file.h"
#include "base/ns.h"
#include "base/str.h"
#include "recording/edf_writer.h"
#include "recording/stream_parser.h"

enum { CHANNELS = 64, RATE_HZ = 1000, SECONDS = 60, PIECE = 4096, TIMES = 3 };

struct counted {
    int64_t blocks;
    double sum; /* so that nothing is left out as unused */
    size_t values;
};

static double now_s(void)
{
    struct timespec now;
    (void)clock_gettime(CLOCK_PROCESS_CPUTIME_ID, &now);
    return (double)now.tv_sec + 1e-9 * (double)now.tv_nsec;
}

static void fail(const struct err *err)
{
    (void)fprintf(stderr, "bench_stream: %s\n", err->text);
    exit(2);
}

static int take_header(void *context, const struct stream_header *header, struct err *err)
{
    struct counted *counted = context;
    (void)err;
    counted->values = 0;
    for (size_t i = 0; i < header->channel_count; i++)
        counted->values += (size_t)header->channels[i].samples;
    return ERR_OK;
}

static int take_block(void *context, int64_t own_ns, const float *samples, struct err *err)
{
    struct counted *counted = context;
    (void)own_ns;
    (void)err;
    counted->blocks++;
    counted->sum += (double)samples[counted->values - 1];
    return ERR_OK;
}

static float value(int64_t k, int channel)
{
    return 2 * sinf(0.01f * (float)k + (float)channel);
}

static void measure(const char *what, const char *bytes, size_t size)
{
    double best = (double)INFINITY;
    struct counted counted = {0};
    for (int i = 0; i < TIMES; i++) {
        struct stream_sink sink = {take_header, take_block, &counted};
        struct stream_parser *parser = NULL;
        struct err err = {0};
        double began = now_s();
        if (stream_parser_new(0, &sink, &parser, &err))
            fail(&err);
        for (size_t at = 0; at < size; at += PIECE) {
            if (stream_parser_feed(parser, bytes + at, size - at < PIECE ? size - at : PIECE, &err))
                fail(&err);
        }
        if (stream_parser_garbled(parser) > 0)
            (void)printf("garbled: %s\n", stream_parser_complaint(parser));
        stream_parser_free(parser);
        double took = now_s() - began;
        best = took < best ? took : best;
    }
    (void)printf("%-34s %8.1f MB/s  %6.2f %% of a core live   (%lld blocks, %.3f)\n", what,
                 (double)size / best / 1e6, 100 * best / SECONDS, (long long)counted.blocks / TIMES,
                 counted.sum);
}

static void lines(void)
{
    struct str text = {0};
    str_put(&text, "t");
    for (int i = 0; i < CHANNELS; i++)
        str_putf(&text, ",EEG %d [mV]", i);
    for (int64_t k = 0; k < SECONDS * RATE_HZ; k++) {
        str_putf(&text, "\n%.3f", (double)k / RATE_HZ);
        for (int i = 0; i < CHANNELS; i++)
            str_putf(&text, ",%.4f", (double)value(k, i));
    }
    str_putc(&text, '\n');
    if (str_failed(&text))
        fail(&(struct err){ERR_MEMORY, "memory ran out"});
    measure("64 ch x 1 kHz as lines", text.text, text.length);
    str_free(&text);
}

static void records(const char *folder)
{
    enum { SAMPLES = RATE_HZ / 10 };
    static float record[CHANNELS * SAMPLES];
    static char labels[CHANNELS][16];
    char path[512];
    struct edf_channel_spec channels[CHANNELS];
    struct edf_writer *writer = NULL;
    struct mapped file;
    struct err err = {0};
    (void)snprintf(path, sizeof path, "%s/stream.bdf", folder);
    for (int i = 0; i < CHANNELS; i++) {
        (void)snprintf(labels[i], sizeof labels[i], "EEG %d", i);
        channels[i] = (struct edf_channel_spec){labels[i], "mV", "", "", -20, 20, 0, 0, SAMPLES};
    }
    struct edf_spec spec = {.bdf = true,
                            .discontinuous = true,
                            .lowest_is_missing = true,
                            .record_ns = 100 * NS_PER_MS,
                            .channels = channels,
                            .channel_count = CHANNELS};
    (void)unlink(path);
    if (edf_writer_open(path, &spec, &writer, &err))
        fail(&err);
    for (int64_t at = 0; at < SECONDS * 10; at++) {
        for (int i = 0; i < CHANNELS * SAMPLES; i++)
            record[i] = value(at * SAMPLES + i % SAMPLES, i / SAMPLES);
        if (edf_writer_record(writer, at * spec.record_ns, record, &err))
            fail(&err);
    }
    if (edf_writer_close(writer, &err) || disk_files.map(&disk_files, path, &file, &err))
        fail(&err);
    measure("64 ch x 1 kHz as BDF+ records", (const char *)file.data, file.size);
    disk_files.unmap(&disk_files, &file);
    (void)unlink(path);
}

int main(int argc, char **argv)
{
    if (argc < 2) {
        (void)fprintf(stderr, "bench_stream: write bench_stream FOLDER\n");
        return 2;
    }
    lines();
    records(argv[1]);
    return 0;
}
