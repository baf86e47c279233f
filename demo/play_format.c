/*
 * play_format.c - lines of numbers, and a BDF+ stream. The BDF+ header is the recording writer's
 * own; records are put together here, as a stream is no file that could be patched.
 */
#include "play_format.h"

#include <errno.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "base/array.h"
#include "base/file.h"
#include "base/ns.h"
#include "output.h"
#include "recording/edf_writer.h"

enum { NOTES_BYTES = 24, WIDTH = 3, LOW = -8388608, HIGH = 8388607 };

/* The converter's range is the end, in whatever form its values are sent. */
static double sample(const struct play_channel *channel, int64_t k)
{
    size_t at = (size_t)k;
    float value = channel->samples[channel->period ? at * channel->stride % channel->period : at];
    return fmin(fmax((double)value, channel->physical_min), channel->physical_max);
}

/* ---- lines ---- */

static int lines_header(const struct play_stream *stream, struct str *out, struct err *err)
{
    str_put(out, "t");
    for (size_t c = 0; c < stream->count; c++)
        str_putf(out, ",%s [%s]", stream->channels[c].label, stream->channels[c].unit);
    str_putc(out, '\n');
    return str_failed(out) ? err_memory(err, "a header") : ERR_OK;
}

static int greatest_rate_hz(const struct play_stream *stream)
{
    int rate_hz = 0;
    for (size_t c = 0; c < stream->count; c++)
        rate_hz = stream->channels[c].rate_hz > rate_hz ? stream->channels[c].rate_hz : rate_hz;
    return rate_hz;
}

static void lines_packet(const struct play_stream *stream, int64_t packet, struct str *out)
{
    int rate_hz = greatest_rate_hz(stream);
    int64_t rows = rate_hz / PACKETS_PER_S;
    for (int64_t row = packet * rows; row < (packet + 1) * rows; row++) {
        str_put_seconds(out, mul_div(row, NS_PER_S, rate_hz));
        for (size_t c = 0; c < stream->count; c++) {
            const struct play_channel *channel = &stream->channels[c];
            int64_t k = row * channel->rate_hz / rate_hz;
            str_putf(out, ",%.6g", sample(channel, k));
        }
        str_putc(out, '\n');
    }
}

/* ---- BDF+ ---- */

static int read_back(const char *path, struct str *out, struct err *err)
{
    struct mapped file;
    int failed = disk_files.map(&disk_files, path, &file, err);
    if (failed)
        return failed;
    str_put_n(out, (const char *)file.data, file.size);
    disk_files.unmap(&disk_files, &file);
    return str_failed(out) ? err_memory(err, "a header") : ERR_OK;
}

/* The writer puts the header into a file of its own, which is read back and removed. */
static int write_header(const struct edf_spec *spec, struct str *out, struct err *err)
{
    char folder[] = "/tmp/theatre-XXXXXX";
    struct str path = {0};
    struct edf_writer *writer = NULL;
    if (!mkdtemp(folder))
        return err_errno(err, folder, "make a folder");
    str_putf(&path, "%s/header", folder);
    int failed = str_failed(&path) ? err_memory(err, "a path")
                                   : edf_writer_open(path.text, spec, &writer, err);
    if (!failed) {
        edf_writer_abandon(writer); /* leaves a count of -1, as a stream's is */
        failed = read_back(path.text, out, err);
        (void)unlink(path.text);
    }
    (void)rmdir(folder); /* a temporary that stays does no harm */
    str_free(&path);
    return failed;
}

static int bdf_header(const struct play_stream *stream, struct str *out, struct err *err)
{
    struct time_arg start = {0};
    struct edf_channel_spec *specs = NULL;
    int failed = array_new_zero((void **)&specs, stream->count, sizeof *specs, err);
    if (failed)
        return failed;
    for (size_t c = 0; c < stream->count; c++) {
        const struct play_channel *from = &stream->channels[c];
        specs[c] = (struct edf_channel_spec){.label = from->label,
                                             .unit = from->unit,
                                             .transducer = from->transducer,
                                             .prefilter = "",
                                             .physical_min = from->physical_min,
                                             .physical_max = from->physical_max,
                                             .samples_per_record = from->rate_hz / PACKETS_PER_S};
    }
    (void)iso_parse(THEATRE_START, &start); /* our own text */
    struct edf_spec spec = {.bdf = true,
                            .discontinuous = stream->gaps,
                            .subject = "S-204 F X X",
                            .recording = "X X Simulated_monitor",
                            .start_civil_ns = start.ns,
                            .record_ns = PACKET_MS * NS_PER_MS,
                            .annotation_bytes = NOTES_BYTES,
                            .channels = specs,
                            .channel_count = stream->count};
    failed = write_header(&spec, out, err);
    free(specs);
    return failed;
}

static void put_sample(const struct play_channel *channel, double value, struct str *out)
{
    double gain = (channel->physical_max - channel->physical_min) / ((double)HIGH - LOW);
    uint32_t bits = (uint32_t)(int32_t)lrint((value - channel->physical_min) / gain + LOW);
    for (int byte = 0; byte < WIDTH; byte++)
        str_putc(out, (char)(bits >> (8 * byte)));
}

static void bdf_packet(const struct play_stream *stream, int64_t packet, struct str *out)
{
    for (size_t c = 0; c < stream->count; c++) {
        const struct play_channel *channel = &stream->channels[c];
        int64_t count = channel->rate_hz / PACKETS_PER_S;
        for (int64_t k = packet * count; k < (packet + 1) * count; k++)
            put_sample(channel, sample(channel, k), out);
    }
    size_t end = out->length + NOTES_BYTES;
    str_putc(out, '+');
    str_put_seconds(out, packet * PACKET_MS * NS_PER_MS);
    str_put(out, "\x14\x14");
    while (out->length < end && !str_failed(out))
        str_putc(out, '\0');
}

const struct play_format play_lines = {"lines", lines_header, lines_packet};
const struct play_format play_bdf = {"bdf", bdf_header, bdf_packet};
