/*
 * test_live_reader.c - a live stream from a FIFO and from a TCP socket through to files: lines and
 * records, a byte at a time, lost connections, sources that come later or never.
 */
#include <criterion/criterion.h>

#include <arpa/inet.h>
#include <fcntl.h>
#include <math.h>
#include <netinet/in.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/socket.h>
#include <sys/stat.h>
#include <time.h>
#include <unistd.h>

#include "base/file.h"
#include "live_feed.h"

TestSuite(live_reader, .init = feed_set_up, .fini = feed_tear_down);

enum { RATE = 250 };

static const double ecg_step = 40.0 / 16777215;

static struct live_stream *start(const char *source)
{
    struct live_stream_config config = {
        .source = source, .folder = feed_folder, .stem = "case", .subject = "S 7"};
    struct live_stream *stream = NULL;
    struct err err = {0};
    cr_assert_eq(live_stream_start(&config, &stream, &err), 0, "%s", err.text);
    return stream;
}

static void stop(struct live_stream *stream)
{
    struct err err = {0};
    cr_assert_eq(live_stream_stop(stream, 30000, &err), 0, "%s", err.text);
}

/* Polls until so many samples came and the state is the one that is meant. */
static struct live_status wait_for(struct live_stream *stream, int64_t samples,
                                   enum live_state state)
{
    struct live_status status;
    for (int i = 0; i < 6000; i++) {
        live_stream_status(stream, &status);
        if (status.samples >= samples && status.state == state)
            return status;
        (void)nanosleep(&(struct timespec){0, 5000000}, NULL);
    }
    cr_assert_fail("%lld samples, state %d: %s", (long long)status.samples, (int)status.state,
                   status.text);
    return status;
}

static void put(int fd, const void *bytes, size_t size, size_t piece)
{
    const char *from = bytes;
    while (size > 0) {
        ssize_t wrote = write(fd, from, piece < size ? piece : size);
        cr_assert_gt(wrote, 0);
        from += wrote;
        size -= (size_t)wrote;
    }
}

/* Lines of an ECG at RATE with their own time, samples [first, first + count). */
static void put_lines(int fd, int64_t first, int count, size_t piece)
{
    char line[64];
    put(fd, "t,ECG II [mV]\n", 14, piece);
    for (int64_t k = first; k < first + count; k++) {
        float value = feed_value(0, k);
        int length = isnan(value) ? snprintf(line, sizeof line, "%.3f,\n", (double)k / RATE)
                                  : snprintf(line, sizeof line, "%.3f,%.9g\n", (double)k / RATE,
                                             (double)value);
        put(fd, line, (size_t)length, piece);
    }
}

/* The samples of part 1 that are not padding, one after the other. */
static void expect_ecg(struct live_stream *stream, int64_t count)
{
    struct feed feed = {.stream = stream};
    struct recording *recording = feed_open(1);
    const struct channel *channel = &recording_info(recording)->channels[0];
    struct err err = {0};
    int64_t k = 0;
    cr_assert_geq(channel->samples, count);
    for (size_t i = 0; i < channel->run_count; i++) {
        for (int64_t at = channel->runs[i].first;
             at < channel->runs[i].first + channel->runs[i].count; at++) {
            float got, want = feed_value(0, k);
            cr_assert_eq(recording_read(recording, 0, at, 1, &got, &err), 0);
            if (isnan(got) && (!isnan(want) || k == count))
                continue; /* padding */
            cr_assert((isnan(got) && isnan(want)) ||
                          fabs((double)got - (double)want) <= ecg_step + 1e-6,
                      "sample %lld", (long long)k);
            k++;
        }
    }
    cr_expect_eq(k, count);
    feed_expect_same(feed_trace(&feed, 0, NULL), recording, 0, ecg_step);
    recording_close(recording);
}

Test(live_reader, lines_from_a_fifo_that_is_lost_and_comes_back)
{
    char path[96], source[128];
    (void)snprintf(path, sizeof path, "%s/pipe", feed_folder);
    (void)snprintf(source, sizeof source, "fifo:%s", path);
    struct live_stream *stream = start(source);
    struct live_status status = wait_for(stream, 0, LIVE_CONNECTING);
    for (int i = 0; i < 6000 && !status.text[0]; i++) {
        (void)nanosleep(&(struct timespec){0, 5000000}, NULL);
        live_stream_status(stream, &status);
    }
    cr_expect_neq(status.text[0], '\0', "says why");
    cr_assert_eq(mkfifo(path, 0600), 0);
    int fd = open(path, O_WRONLY | O_CLOEXEC);
    cr_assert_geq(fd, 0);
    put_lines(fd, 0, 2010, 4096);
    status = wait_for(stream, 2010, LIVE_RECEIVING);
    cr_expect_str_eq(status.text, "");
    cr_expect(status.gaps == 0 && status.part_count == 1 && status.garbled == 0);
    (void)close(fd);
    (void)wait_for(stream, 2010, LIVE_LOST);
    fd = open(path, O_WRONLY | O_CLOEXEC);
    cr_assert_geq(fd, 0);
    put_lines(fd, 2010, 990, 4096);
    status = wait_for(stream, 3000, LIVE_RECEIVING);
    cr_expect(status.gaps == 1 && status.part_count == 1 && status.dropped == 0);
    stop(stream);
    (void)close(fd);
    expect_ecg(stream, 3000);
    live_stream_free(stream);
}

/* ---- TCP ---- */

static int listen_at(char *source, size_t size)
{
    struct sockaddr_in address = {.sin_family = AF_INET};
    socklen_t length = sizeof address;
    address.sin_addr.s_addr = htonl(INADDR_LOOPBACK);
    int fd = socket(AF_INET, SOCK_STREAM | SOCK_CLOEXEC, 0);
    cr_assert_geq(fd, 0);
    cr_assert_eq(bind(fd, (struct sockaddr *)&address, sizeof address), 0);
    cr_assert_eq(listen(fd, 4), 0);
    cr_assert_eq(getsockname(fd, (struct sockaddr *)&address, &length), 0);
    (void)snprintf(source, size, "tcp:127.0.0.1:%d", ntohs(address.sin_port));
    return fd;
}

/* The bytes of an EDF+ file of an ECG in records of a second; the caller frees them. */
static uint8_t *edf_bytes(int seconds, size_t *size)
{
    struct edf_channel_spec channel = {"ECG II", "mV", "", "", -20, 20, 0, 0, RATE};
    struct edf_spec spec = {.bdf = true,
                            .start_civil_ns = 1937033700000000000,
                            .record_ns = NS_PER_S,
                            .lowest_is_missing = true,
                            .channels = &channel,
                            .channel_count = 1};
    struct edf_writer *writer = NULL;
    struct err err = {0};
    char path[96];
    (void)snprintf(path, sizeof path, "%s/device.bdf", feed_folder);
    cr_assert_eq(edf_writer_open(path, &spec, &writer, &err), 0, "%s", err.text);
    for (int i = 0; i < seconds; i++) {
        float record[RATE];
        for (int k = 0; k < RATE; k++)
            record[k] = feed_value(0, (int64_t)i * RATE + k);
        cr_assert_eq(edf_writer_record(writer, 0, record, &err), 0);
    }
    cr_assert_eq(edf_writer_close(writer, &err), 0);
    struct mapped mapped;
    cr_assert_eq(disk_files.map(&disk_files, path, &mapped, &err), 0);
    uint8_t *copy = malloc(mapped.size);
    memcpy(copy, mapped.data, mapped.size);
    *size = mapped.size;
    disk_files.unmap(&disk_files, &mapped);
    return copy;
}

Test(live_reader, records_over_tcp_a_byte_at_a_time)
{
    char source[64];
    size_t size;
    uint8_t *bytes = edf_bytes(12, &size);
    int door = listen_at(source, sizeof source);
    struct live_stream *stream = start(source);
    int fd = accept(door, NULL, NULL);
    cr_assert_geq(fd, 0);
    put(fd, bytes, size, 1);
    struct live_status status = wait_for(stream, 12 * RATE, LIVE_RECEIVING);
    cr_expect(status.gaps == 0 && status.part_count == 1 && status.garbled == 0);
    stop(stream);
    (void)close(fd);
    (void)close(door);
    struct feed feed = {.stream = stream};
    const struct trace *trace = feed_trace(&feed, 0, NULL);
    struct recording *recording = feed_open(1);
    cr_assert_eq(trace->samples, 12 * RATE);
    feed_expect_same(trace, recording, 0, 0);
    for (int k = 0; k < 12 * RATE; k++) {
        float got, want = feed_value(0, k);
        struct err err = {0};
        cr_assert_eq(trace_read(trace, k, 1, &got, &err), 0);
        cr_assert(isnan(want) ? isnan(got) : fabs((double)(got - want)) <= ecg_step + 1e-6);
    }
    recording_close(recording);
    live_stream_free(stream);
    free(bytes);
}

Test(live_reader, a_connection_that_is_cut_again_and_again)
{
    enum { CUTS = 20, LINES = 300 };
    char source[64];
    int door = listen_at(source, sizeof source);
    struct live_stream *stream = start(source);
    for (int i = 0; i < CUTS; i++) {
        int fd = accept(door, NULL, NULL);
        cr_assert_geq(fd, 0);
        put_lines(fd, (int64_t)i * LINES, LINES, 7);
        (void)wait_for(stream, (int64_t)(i + 1) * LINES, LIVE_RECEIVING);
        (void)close(fd);
        (void)wait_for(stream, (int64_t)(i + 1) * LINES, LIVE_LOST);
    }
    struct live_status status;
    struct live_part part;
    struct err err = {0};
    live_stream_status(stream, &status);
    cr_expect(status.gaps == CUTS && status.part_count == 1);
    stop(stream);
    cr_assert_eq(live_stream_part(stream, 0, &part, &err), 0);
    cr_assert(part.closed && part.piece_count == CUTS);
    for (size_t i = 1; i < CUTS; i++)
        cr_expect(part.pieces[i].at_ns > part.pieces[i - 1].at_ns &&
                  part.pieces[i].case_ns > part.pieces[i - 1].case_ns);
    expect_ecg(stream, CUTS * LINES);
    live_stream_free(stream);
    (void)close(door);
}

/* ---- the rest ---- */

Test(live_reader, a_source_that_cannot_be_meant_is_refused)
{
    struct live_stream_config config = {
        .source = "tcp:nowhere", .folder = feed_folder, .stem = "case", .subject = "S"};
    struct live_stream *stream = NULL;
    struct err err = {0};
    cr_expect_neq(live_stream_start(&config, &stream, &err), 0);
    cr_expect_null(stream);
    cr_expect(err.text[0] && !strchr(err.text, '\n'));
}

Test(live_reader, a_source_that_never_comes_can_be_stopped)
{
    struct live_stream *stream = start("fifo:/nowhere/at/all");
    stop(stream);
    live_stream_free(stream);
}
