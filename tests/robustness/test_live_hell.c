/*
 * test_live_hell.c - live streams as devices and cables spoil them, from the FIFO or socket to the
 * written parts: every good sample is in a part, once and in order, what was garbled is counted,
 * and every part opens here and in EDFlib. Waits for states, never for time.
 */
#include <criterion/criterion.h>

#include <arpa/inet.h>
#include <edflib.h>
#include <fcntl.h>
#include <math.h>
#include <netinet/in.h>
#include <signal.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/socket.h>
#include <sys/stat.h>
#include <time.h>
#include <unistd.h>

#include "base/ns.h"
#include "case/live_stream.h"
#include "recording/edf_writer.h"
#include "recording/recording.h"

static char folder[] = "/tmp/incisura-hell-XXXXXX";

static void set_up(void)
{
    cr_assert_not_null(mkdtemp(folder));
    (void)signal(SIGPIPE, SIG_IGN);
}

static void tear_down(void)
{
    char command[128];
    (void)snprintf(command, sizeof command, "rm -rf %s", folder);
    cr_expect_eq(system(command), 0);
}

TestSuite(live_hell, .init = set_up, .fini = tear_down);

/* A stream and the device at its other end. Good samples of the first channel are 1, 2, 3, ... */
struct device {
    struct live_stream *stream;
    char fifo[80];
    int listener; /* -1: a FIFO */
    int fd;
    bool slow; /* a byte a write */
    int64_t good, garbled;
    int64_t time_ms; /* of the device's next row */
};

static void plug(struct device *device)
{
    device->fd =
        device->listener >= 0 ? accept(device->listener, NULL, NULL) : open(device->fifo, O_WRONLY);
    cr_assert_geq(device->fd, 0);
}

static struct device start(bool tcp, double rate_hz)
{
    struct device device = {.listener = -1, .fd = -1, .time_ms = 100000};
    char source[96];
    struct err err = {0};
    (void)snprintf(device.fifo, sizeof device.fifo, "%s/fifo", folder);
    if (tcp) {
        struct sockaddr_in address = {.sin_family = AF_INET,
                                      .sin_addr.s_addr = htonl(INADDR_LOOPBACK)};
        socklen_t size = sizeof address;
        device.listener = socket(AF_INET, SOCK_STREAM, 0);
        cr_assert_eq(bind(device.listener, (struct sockaddr *)&address, size), 0);
        cr_assert_eq(listen(device.listener, 4), 0);
        cr_assert_eq(getsockname(device.listener, (struct sockaddr *)&address, &size), 0);
        (void)snprintf(source, sizeof source, "tcp:127.0.0.1:%d", ntohs(address.sin_port));
    } else {
        cr_assert_eq(mkfifo(device.fifo, 0600), 0);
        (void)snprintf(source, sizeof source, "fifo:%s", device.fifo);
    }
    struct live_stream_config config = {.source = source,
                                        .rate_hz = rate_hz,
                                        .folder = folder,
                                        .stem = "case",
                                        .subject = "S 7",
                                        .civil_minus_boottime_ns = 1937033700 * NS_PER_S};
    cr_assert_eq(live_stream_start(&config, &device.stream, &err), 0, "%s", err.text);
    plug(&device);
    return device;
}

static void send_n(struct device *device, const char *bytes, size_t count)
{
    while (count > 0) {
        ssize_t put = write(device->fd, bytes, device->slow ? 1 : count);
        cr_assert_gt(put, 0);
        bytes += put;
        count -= (size_t)put;
    }
}

static void send_text(struct device *device, const char *format, ...) PRINTF_LIKE(2, 3);
static void send_text(struct device *device, const char *format, ...)
{
    char text[256];
    va_list args;
    va_start(args, format);
    int length = vsnprintf(text, sizeof text, format, args);
    va_end(args);
    cr_assert(length >= 0 && (size_t)length < sizeof text);
    send_n(device, text, (size_t)length);
}

/* Rows at 100 Hz, good ones. */
static void rows(struct device *device, int count, const char *end)
{
    for (int i = 0; i < count; i++, device->time_ms += 10) {
        device->good++;
        send_text(device, "%lld.%03lld,%lld,%s%s", (long long)(device->time_ms / 1000),
                  (long long)(device->time_ms % 1000), (long long)device->good,
                  device->good % 7 == 3 ? "nan" : "0.5", end);
    }
}

/* A line that is counted, and a multitude of its bytes. */
static void garble(struct device *device, const char *bytes, size_t count)
{
    send_n(device, bytes, count);
    device->garbled++;
}

static struct live_status status_of(struct device *device)
{
    struct live_status status;
    live_stream_status(device->stream, &status);
    return status;
}

static void wait_for(struct device *device, enum live_state state)
{
    for (int i = 0; i < 20000; i++) {
        if (status_of(device).state == state)
            return;
        (void)nanosleep(&(struct timespec){0, NS_PER_MS}, NULL);
    }
    cr_assert_fail("state %d never came; it is %d", state, status_of(device).state);
}

static void unplug(struct device *device)
{
    wait_for(device, LIVE_RECEIVING);
    (void)close(device->fd);
    wait_for(device, LIVE_LOST);
}

/* ---- what is in the parts ---- */

/* EDFlib reads no file with gaps; the records of such a one, said to be plain BDF, it does. */
static void make_plain(const char *path)
{
    char command[256], blanks[44];
    memset(blanks, ' ', sizeof blanks);
    (void)snprintf(command, sizeof command, "cp %s %s/plain.bdf", path, folder);
    cr_assert_eq(system(command), 0);
    (void)snprintf(command, sizeof command, "%s/plain.bdf", folder);
    FILE *file = fopen(command, "r+b");
    cr_assert(file && fseek(file, 192, SEEK_SET) == 0 && fwrite(blanks, 44, 1, file) == 1);
    cr_assert_eq(fclose(file), 0);
}

static void check_edflib(const char *path, bool gaps, const float *want, int64_t count)
{
    char plain[64];
    struct edf_hdr_struct header;
    double *got = malloc((size_t)count * sizeof *got);
    cr_assert_not_null(got);
    if (gaps) {
        cr_assert_lt(edfopen_file_readonly(path, &header, EDFLIB_READ_ALL_ANNOTATIONS), 0);
        cr_expect_eq(header.filetype, EDFLIB_FILE_IS_DISCONTINUOUS);
        make_plain(path);
        (void)snprintf(plain, sizeof plain, "%s/plain.bdf", folder);
        path = plain;
    }
    cr_assert_eq(edfopen_file_readonly(path, &header, EDFLIB_READ_ALL_ANNOTATIONS), 0, "%s: %d",
                 path, header.filetype);
    const struct edf_param_struct *signal = &header.signalparam[0];
    double step = (signal->phys_max - signal->phys_min) / 16777215;
    cr_assert_eq(signal->smp_in_file, count);
    cr_assert_eq(edfread_physical_samples(header.handle, 0, (int)count, got), count);
    for (int64_t i = 0; i < count; i++) {
        double expected = isnan(want[i]) ? signal->phys_min : (double)want[i];
        cr_assert_float_eq(got[i], expected, step + 1e-6 * fabs(expected), "%s: sample %lld", path,
                           (long long)i);
    }
    (void)edfclose_file(header.handle);
    free(got);
}

/* Samples of a part go on counting after *seen. */
static void check_part(const char *path, int64_t *seen)
{
    struct recording *recording = NULL;
    struct err err = {0};
    cr_assert_eq(recording_open(path, NULL, &recording, &err), 0, "%s", err.text);
    const struct recording_info *info = recording_info(recording);
    const struct channel *channel = &info->channels[0];
    cr_expect_eq(info->note_count, 0, "%s: %s", path, info->note_count ? info->notes[0] : "");
    float *samples = malloc((size_t)channel->samples * sizeof *samples);
    cr_assert_not_null(samples);
    cr_assert_eq(recording_read(recording, 0, 0, channel->samples, samples, &err), 0);
    for (int64_t i = 0; i < channel->samples; i++) {
        if (isnan(samples[i]))
            continue;
        ++*seen;
        cr_assert_float_eq((double)samples[i], (double)*seen, 0.3,
                           "%s: sample %lld is %g, not %lld", path, (long long)i,
                           (double)samples[i], (long long)*seen);
    }
    for (size_t i = 1; i < channel->run_count; i++)
        cr_assert_geq(channel->runs[i].start_ns, run_end_ns(&channel->runs[i - 1]));
    check_edflib(path, channel->run_count > 1, samples, channel->samples);
    free(samples);
    recording_close(recording);
}

static size_t finish(struct device *device)
{
    struct err err = {0};
    struct live_part part;
    int64_t seen = 0;
    size_t count = 0;
    unplug(device);
    cr_assert_eq(live_stream_stop(device->stream, 30000, &err), 0, "%s", err.text);
    for (; live_stream_part(device->stream, count, &part, &err) == 0; count++) {
        cr_expect(part.closed);
        check_part(part.path, &seen);
    }
    struct live_status status = status_of(device);
    cr_expect_eq(seen, device->good, "%lld samples, not %lld", (long long)seen,
                 (long long)device->good);
    cr_expect_eq(status.samples, device->good);
    cr_expect_eq(status.garbled, device->garbled, "%lld garbled, not %lld",
                 (long long)status.garbled, (long long)device->garbled);
    cr_expect_eq(status.dropped, 0);
    cr_expect_str_empty(status.trouble);
    live_stream_free(device->stream);
    if (device->listener >= 0)
        (void)close(device->listener);
    return count;
}

/* ---- lines ---- */

static void all_kinds_of_noise(struct device *device)
{
    static char megabyte[1 << 20];
    static const char zeros[] = "\0\0\0", inside[] = "1.0,\0002,3\n";
    memset(megabyte, '7', sizeof megabyte - 1);
    megabyte[sizeof megabyte - 1] = '\n';
    rows(device, 50, "\n");
    rows(device, 50, "\r\n");
    send_n(device, zeros, 3);
    rows(device, 10, "\n");
    garble(device, inside, sizeof inside - 1);
    garble(device, megabyte, sizeof megabyte);
    rows(device, 10, "\n\n \n");
    garble(device, "1.0,x2,3\n", 9);
    garble(device, "READY\n", 6);
    garble(device, "1.0,2\n", 6);
    garble(device, "1.0,2,3,4\n", 10);
    garble(device, "\xFF\xFE\x80\x01\n", 5);
    garble(device, "\"1.0,2\n", 7);
    device->slow = true;
    rows(device, 20, "\r\n");
    device->slow = false;
}

Test(live_hell, lines_through_a_fifo)
{
    struct device device = start(false, 0);
    send_text(&device, "t,id,a\n");
    all_kinds_of_noise(&device);
    device.time_ms -= 5000; /* back */
    rows(&device, 100, "\n");
    device.time_ms += 86400000; /* a day ahead */
    rows(&device, 100, "\n");
    device.time_ms += 3000; /* rows that are missing */
    rows(&device, 100, "\n");
    for (int i = 0; i < 20; i++) {
        if (i % 2)
            garble(&device, "123.4,5", 7); /* broken off */
        unplug(&device);
        plug(&device);
        if (i % 3 == 0)
            send_text(&device, "t,id,a\n");
        if (i % 5 == 0)
            garble(&device, ".5,1\n", 5);                /* joined in the middle */
        device.time_ms += i % 4 ? 500 : -device.time_ms; /* gone on, or switched off and on */
        rows(&device, 120, "\n");
    }
    send_text(&device, "t,id,other\n"); /* another header */
    all_kinds_of_noise(&device);
    rows(&device, 3000, "\n"); /* half a minute at once */
    cr_expect_geq(finish(&device), 2);
}

/* No header, no times, joined in the middle of a row. */
Test(live_hell, rows_at_a_given_rate_through_a_fifo)
{
    struct device device = start(false, 250);
    garble(&device, "5\n", 2);
    device.slow = true;
    for (int turn = 0; turn < 4; turn++) {
        for (int i = 0; i < 600; i++)
            send_text(&device, i % 50 == 7 ? "%lld;\r\n" : "%lld;0,5\r\n",
                      (long long)++device.good);
        if (turn == 3)
            break;
        garble(&device, "low battery\n", 12);
        garble(&device, "1;2;3\n", 6);
        if (turn == 2)
            continue;
        garble(&device, "9", 1);
        unplug(&device);
        plug(&device);
        device.slow = !device.slow;
    }
    garble(&device, "9", 1); /* counted though nothing follows */
    (void)finish(&device);
}

/* ---- records ---- */

/* A BDF+ file of so many records of 100 ms whose samples count on. */
static size_t make_records(struct device *device, int records, char *bytes, size_t room)
{
    static const struct edf_channel_spec channels[] = {
        {"id", "", "", "", -8388608, 8388607, 0, 0, 25}};
    struct edf_spec spec = {.bdf = true,
                            .discontinuous = true,
                            .lowest_is_missing = true,
                            .start_civil_ns = 1937033700 * NS_PER_S,
                            .record_ns = 100 * NS_PER_MS,
                            .annotation_bytes = 30,
                            .channels = channels,
                            .channel_count = 1};
    struct edf_writer *writer = NULL;
    struct err err = {0};
    char path[80];
    (void)snprintf(path, sizeof path, "%s/sent.bdf", folder);
    (void)unlink(path);
    cr_assert_eq(edf_writer_open(path, &spec, &writer, &err), 0, "%s", err.text);
    for (int k = 0; k < records; k++) {
        float record[25];
        for (int i = 0; i < 25; i++)
            record[i] = (float)++device->good;
        int64_t onset_ns = k * spec.record_ns + (k > records / 2) * 2 * NS_PER_S;
        cr_assert_eq(edf_writer_record(writer, onset_ns, record, &err), 0, "%s", err.text);
    }
    cr_assert_eq(edf_writer_close(writer, &err), 0, "%s", err.text);
    FILE *file = fopen(path, "rb");
    cr_assert_not_null(file);
    size_t size = fread(bytes, 1, room, file);
    cr_assert(size < room && fclose(file) == 0);
    return size;
}

Test(live_hell, records_through_a_socket)
{
    enum { RECORDS = 30, HEADER = 768, RECORD = 75 + 30 };
    static char bytes[65536];
    struct device device = start(true, 0);
    for (int turn = 0; turn < 20; turn++) {
        size_t size = make_records(&device, RECORDS, bytes, sizeof bytes);
        cr_assert_eq(size, HEADER + RECORDS * RECORD);
        device.slow = turn % 4 == 0;
        if (turn % 4 == 3) { /* bytes lost in record 10: the rest is skipped to the next header */
            send_n(&device, bytes, HEADER + 10 * RECORD + 7);
            send_n(&device, bytes + HEADER + 10 * RECORD + 11, size - HEADER - 10 * RECORD - 11);
            device.garbled += 20 * RECORD - 4;
            device.good -= 20 * 25;
            continue; /* and that one comes on the same connection */
        }
        if (turn % 4 == 1) { /* broken off in a record */
            size -= 50;
            device.garbled += RECORD - 50;
            device.good -= 25;
        }
        send_n(&device, bytes, size);
        unplug(&device);
        plug(&device);
        if (turn % 4 == 2)
            garble(&device, "\n", 1); /* noise before the header */
    }
    (void)finish(&device);
}
