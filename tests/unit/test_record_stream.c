/*
 * test_record_stream.c - EDF and BDF as they stream in: the same samples and onsets as in the file
 * of the same bytes; headers again, breaks, lost bytes, what is no header.
 */
#include <criterion/criterion.h>

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "base/ns.h"
#include "recording/edf_writer.h"
#include "recording/recording.h"
#include "stream_log.h"

enum { FAST = 25, SLOW = 2, RECORD = FAST + SLOW, RECORDS = 12 };

static char folder[] = "/tmp/incisura-records-XXXXXX";
static char path[64];

static void set_up(void)
{
    cr_assert_not_null(mkdtemp(folder));
    (void)snprintf(path, sizeof path, "%s/a.bdf", folder);
}

static void tear_down(void)
{
    (void)unlink(path);
    (void)rmdir(folder);
}

TestSuite(record_stream, .init = set_up, .fini = tear_down);

static const struct edf_channel_spec channels[] = {
    {"ECG II", "mV", "electrode", "HP:0.05Hz", -20, 20, 0, 0, FAST},
    {"Temp", "degC", "", "", 45, 10, -2000, 2000, SLOW},
};

static float value(size_t channel, int64_t k)
{
    if (k % 17 == 5)
        return NAN;
    return channel ? 30 + (float)(k % 100) / 10 : 10 * sinf(0.01f * (float)k);
}

/* Makes a file of RECORDS records of 100 ms, the second half of them gap_ns late. */
static void make_file(bool bdf, int64_t gap_ns)
{
    struct edf_spec spec = {.bdf = bdf,
                            .discontinuous = true,
                            .lowest_is_missing = true,
                            .start_civil_ns = 1937033700250000003,
                            .record_ns = 100 * NS_PER_MS,
                            .channels = channels,
                            .channel_count = 2};
    struct edf_writer *writer = NULL;
    struct err err = {0};
    (void)unlink(path);
    cr_assert_eq(edf_writer_open(path, &spec, &writer, &err), 0, "%s", err.text);
    for (int64_t at = 0; at < RECORDS; at++) {
        float record[RECORD];
        for (int i = 0; i < FAST; i++)
            record[i] = value(0, at * FAST + i);
        for (int i = 0; i < SLOW; i++)
            record[FAST + i] = value(1, at * SLOW + i);
        int64_t onset_ns = at * spec.record_ns + (at >= RECORDS / 2 ? gap_ns : 0);
        cr_assert_eq(edf_writer_record(writer, onset_ns, record, &err), 0, "%s", err.text);
    }
    cr_assert_eq(edf_writer_close(writer, &err), 0, "%s", err.text);
}

/* The file's bytes, and how many of them are its header and a record. */
struct bytes {
    uint8_t data[16384];
    size_t size, header, record;
};

static struct bytes file_bytes(bool bdf, int64_t gap_ns)
{
    struct bytes bytes;
    make_file(bdf, gap_ns);
    FILE *file = fopen(path, "rb");
    cr_assert_not_null(file);
    bytes.size = fread(bytes.data, 1, sizeof bytes.data, file);
    (void)fclose(file);
    cr_assert_lt(bytes.size, sizeof bytes.data);
    bytes.header = 256 * 4; /* two channels and the annotations */
    bytes.record = (bytes.size - bytes.header) / RECORDS;
    cr_assert_eq(bytes.record * RECORDS + bytes.header, bytes.size);
    return bytes;
}

/* Without annotations' meaning: plain EDF or BDF, whose third signal holds numbers. */
static void make_plain(struct bytes *bytes)
{
    memset(bytes->data + 192, ' ', 44);
}

/* Blocks [first, first + count) of the log are records [from, from + count) of the last file. */
static void expect_records(const struct stream_log *log, size_t first, size_t from, size_t count)
{
    struct recording *recording = NULL;
    struct err err = {0};
    float want[RECORDS * FAST];
    int64_t zero_ns = 0;
    cr_assert_geq(log->block_count, first + count);
    cr_assert_eq(recording_open(path, NULL, &recording, &err), 0, "%s", err.text);
    const struct recording_info *info = recording_info(recording);
    size_t offset = 0;
    for (size_t c = 0; c < 2; c++) {
        size_t samples = c ? SLOW : FAST;
        const struct channel *channel = &info->channels[c];
        cr_assert_eq(recording_read(recording, c, 0, channel->samples, want, &err), 0);
        for (size_t i = 0; i < count; i++) {
            const float *got = log->values + (first + i) * log->block_values + offset;
            cr_assert_eq(memcmp(got, want + (from + i) * samples, samples * sizeof *got), 0,
                         "channel %zu, record %zu", c, from + i);
            /* The file's first onset is the fraction of its start. */
            size_t sample = (from + i) * samples, run = 0;
            while (run + 1 < channel->run_count && channel->runs[run + 1].first <= (int64_t)sample)
                run++;
            int64_t start_ns =
                channel->runs[run].start_ns + (int64_t)(sample - (size_t)channel->runs[run].first) /
                                                  (int64_t)samples * 100 * NS_PER_MS;
            zero_ns = c == 0 && i == 0 ? log->own_ns[first] - start_ns : zero_ns;
            cr_assert_eq(log->own_ns[first + i] - start_ns, zero_ns);
        }
        offset += samples;
    }
    recording_close(recording);
}

Test(record_stream, samples_and_onsets_are_those_of_the_file)
{
    static const struct {
        bool bdf;
        int64_t gap_ns;
        const char *format;
    } files[] = {{false, 0, "EDF+C"},
                 {true, 0, "BDF+C"},
                 {false, 1700000001, "EDF+D"},
                 {true, 1700000001, "BDF+D"}};
    for (size_t i = 0; i < 4; i++) {
        struct bytes bytes = file_bytes(files[i].bdf, files[i].gap_ns);
        cr_assert_eq(memcmp(bytes.data + 192, files[i].format, 5), 0);
        struct input input = {0};
        input_put_n(&input, bytes.data, bytes.size);
        struct stream_log log = input_play(&input);
        cr_assert_eq(log.headers, 1);
        cr_assert_eq(log.channel_count, 2);
        cr_expect_str_eq(log.labels[0], "ECG II");
        cr_expect_eq(log.channels[0].role, ROLE_ECG);
        cr_expect_eq(log.channels[0].samples, FAST);
        cr_expect_eq(log.channels[0].physical_min, -20);
        cr_expect_eq(log.channels[0].digital_max, files[i].bdf ? 8388607 : 32767);
        cr_expect_str_eq(log.units[1], "degC");
        cr_expect_eq(log.channels[1].physical_min, 45);
        cr_expect_eq(log.channels[1].digital_min, -2000);
        cr_expect_eq(log.block_ns, 100 * NS_PER_MS);
        cr_expect_eq(log.blocks, 1);
        cr_assert_eq(log.block_count, RECORDS);
        cr_expect_eq(log.own_ns[0], 250000003);
        expect_records(&log, 0, 0, RECORDS);
        cr_expect_eq(log.garbled, 0);
        stream_log_free(&log);
    }
}

Test(record_stream, plain_records_have_no_time)
{
    struct bytes bytes = file_bytes(false, 0);
    struct input input = {0};
    make_plain(&bytes);
    input_put_n(&input, bytes.data, bytes.size);
    struct stream_log log = input_play(&input);
    cr_assert_eq(log.headers, 1);
    cr_expect_eq(log.channel_count, 3);
    cr_expect_eq(log.block_count, RECORDS);
    cr_expect_eq(log.own_ns[3], NS_NONE);
    stream_log_free(&log);
}

Test(record_stream, another_header_where_a_record_should_begin)
{
    struct bytes edf = file_bytes(false, 0), bdf = file_bytes(true, 0);
    struct input input = {0};
    input_put_n(&input, edf.data, edf.size);
    input_put_n(&input, bdf.data, bdf.size);
    input_put_n(&input, bdf.data, bdf.size);
    struct stream_log log = input_play(&input);
    cr_assert_eq(log.headers, 3);
    cr_assert_eq(log.block_count, 3 * RECORDS);
    expect_records(&log, RECORDS, 0, RECORDS);
    expect_records(&log, 2 * RECORDS, 0, RECORDS);
    cr_expect_eq(log.garbled, 0);
    stream_log_free(&log);
}

Test(record_stream, a_break_inside_a_record_or_a_header)
{
    struct bytes bytes = file_bytes(true, 0);
    struct input input = {0};
    input_put_n(&input, bytes.data, bytes.header + 3 * bytes.record + 10);
    input_break(&input);
    input_put_n(&input, bytes.data, 700);
    input_break(&input);
    input_put_n(&input, bytes.data, bytes.size);
    input_break(&input);
    struct stream_log log = input_play(&input);
    cr_assert_eq(log.headers, 2);
    cr_assert_eq(log.block_count, 3 + RECORDS);
    expect_records(&log, 0, 0, 3);
    expect_records(&log, 3, 0, RECORDS);
    cr_expect_eq(log.garbled, 710);
    stream_log_free(&log);
}

/* Records that go on after a break, without a header, cannot be told from noise. */
Test(record_stream, what_goes_on_after_a_break_is_skipped_to_a_header)
{
    struct bytes bytes = file_bytes(true, 0);
    struct input input = {0};
    input_put_n(&input, bytes.data, bytes.header + 2 * bytes.record);
    input_break(&input);
    input_put_n(&input, bytes.data + bytes.header + 2 * bytes.record + 5, 2 * bytes.record);
    input_put_n(&input, bytes.data, bytes.size);
    struct stream_log log = input_play(&input);
    cr_assert_eq(log.headers, 2);
    cr_assert_eq(log.block_count, 2 + RECORDS);
    expect_records(&log, 2, 0, RECORDS);
    cr_expect_eq(log.garbled, 2 * bytes.record);
    stream_log_free(&log);
}

Test(record_stream, headers_that_cannot_be_meant_are_skipped)
{
    static const struct {
        size_t at;
        const char *text;
    } faults[] = {{244, "0       "}, {252, "1025"},     {252, "0   "},
                  {252, "many"},     {244, "soon    "}, {236, "some    "}};
    for (size_t i = 0; i < sizeof faults / sizeof *faults; i++) {
        struct bytes bytes = file_bytes(true, 0), good = bytes;
        struct input input = {0};
        memcpy(bytes.data + faults[i].at, faults[i].text, strlen(faults[i].text));
        input_put_n(&input, bytes.data, bytes.size);
        input_put_n(&input, good.data, good.size);
        struct stream_log log = input_play(&input);
        cr_assert_eq(log.headers, 1, "fault %zu", i);
        cr_assert_eq(log.block_count, RECORDS);
        expect_records(&log, 0, 0, RECORDS);
        cr_expect_eq(log.garbled, bytes.size);
        cr_expect_str_not_empty(log.complaint);
        stream_log_free(&log);
    }
}

/* ---- bytes that are lost ---- */

/* Whatever is lost, wherever: no sample is wrong, and the next header is found. */
Test(record_stream, lost_bytes_are_noticed_and_the_next_header_found)
{
    for (size_t lost = 1; lost < 12; lost++) {
        for (int late = 0; late < 2; late++) {
            struct bytes bytes = file_bytes(late, 0);
            struct input input = {0};
            /* In the samples of record 3, or of the last record just before the next header. */
            size_t whole = late ? RECORDS - 1 : 3;
            size_t at = bytes.header + whole * bytes.record + 20;
            input_put_n(&input, bytes.data, at);
            input_put_n(&input, bytes.data + at + lost, bytes.size - at - lost);
            input_put_n(&input, bytes.data, bytes.size);
            struct stream_log log = input_play(&input);
            cr_assert_eq(log.headers, 2, "%zu bytes", lost);
            cr_assert_eq(log.block_count, whole + RECORDS, "%zu bytes: %zu", lost, log.block_count);
            expect_records(&log, 0, 0, whole);
            expect_records(&log, whole, 0, RECORDS);
            cr_expect_eq(log.garbled, (RECORDS - whole) * bytes.record - lost);
            stream_log_free(&log);
        }
    }
}

/* Plain records say nothing that a lost byte would break; a header inside one does. One that begins
 * in a record's very last bytes is found too, but that record was given out by then. */
Test(record_stream, a_header_inside_a_plain_record_is_found)
{
    for (size_t lost = 1; lost < 200; lost += 66) {
        struct bytes bytes = file_bytes(lost % 2, 0);
        struct input input = {0};
        make_plain(&bytes);
        input_put_n(&input, bytes.data, bytes.size - lost);
        input_put_n(&input, bytes.data, bytes.size);
        struct stream_log log = input_play(&input);
        cr_assert_eq(log.headers, 2);
        bool across = lost < 8;
        cr_expect_eq(log.block_count, 2 * RECORDS - !across - lost / bytes.record);
        cr_expect_eq(log.garbled, across ? 0 : bytes.record - lost % bytes.record);
        stream_log_free(&log);
    }
}

/* A record of two bytes is shorter than what tells a header. */
Test(record_stream, a_header_after_records_of_two_bytes)
{
    struct bytes bytes = file_bytes(false, 0);
    uint8_t one[512 + 20];
    struct input input = {0};
    make_plain(&bytes);
    memcpy(one, bytes.data, 512);
    memcpy(one + 184, "512     ", 8);
    memcpy(one + 252, "1   ", 4);
    static const size_t sizes[] = {16, 80, 8, 8, 8, 8, 8, 80};
    for (size_t i = 0, to = 256, from = 256; i < 8; to += sizes[i], from += 3 * sizes[i], i++)
        memcpy(one + to, bytes.data + from, sizes[i]);
    memcpy(one + 256 + 216, "1       ", 8);
    for (int i = 0; i < 20; i++)
        one[512 + i] = (uint8_t)i;
    memcpy(one + 512 + 6, "0 0\xFF", 4); /* begins like a header, and is none */
    input_put_n(&input, one, sizeof one);
    input_put_n(&input, bytes.data, bytes.size);
    struct stream_log log = input_play(&input);
    cr_assert_eq(log.headers, 2);
    cr_expect_eq(log.block_count, 10 + RECORDS);
    cr_expect_eq(log.garbled, 0);
    stream_log_free(&log);
}

Test(record_stream, garbage_before_the_first_header)
{
    static const char garbage[] = "\xFF\x42\0READY\r\n0  0 garbage \xFF\xFF";
    for (int bdf = 0; bdf < 2; bdf++) {
        struct bytes bytes = file_bytes(bdf, 0);
        struct input input = {0};
        input_put_n(&input, garbage, sizeof garbage - 1);
        input_put_n(&input, bytes.data, bytes.size);
        struct stream_log log = input_play(&input);
        cr_assert_eq(log.headers, 1);
        cr_assert_eq(log.block_count, RECORDS);
        expect_records(&log, 0, 0, RECORDS);
        cr_expect_gt(log.garbled, 0);
        stream_log_free(&log);
    }
}

Test(record_stream, more_signals_than_1024_are_said_to_be_too_many)
{
    struct bytes bytes = file_bytes(true, 0);
    struct input input = {0};
    memcpy(bytes.data + 252, "1025", 4);
    input_put_n(&input, bytes.data, 256);
    struct stream_log log = input_play(&input);
    cr_expect_not_null(strstr(log.complaint, "1024"), "%s", log.complaint);
    stream_log_free(&log);
}

Test(record_stream, labels_that_are_the_same_are_numbered)
{
    struct bytes bytes = file_bytes(true, 0);
    struct input input = {0};
    make_plain(&bytes);
    for (size_t i = 0; i < 3; i++)
        memcpy(bytes.data + 256 + 16 * i, "ECG             ", 16);
    input_put_n(&input, bytes.data, bytes.size);
    struct stream_log log = input_play(&input);
    cr_assert_eq(log.channel_count, 3);
    cr_expect_str_eq(log.labels[0], "ECG");
    cr_expect_str_eq(log.labels[1], "ECG #2");
    cr_expect_str_eq(log.labels[2], "ECG #3");
    stream_log_free(&log);
}

/* A signal without samples is no channel of a stream: nothing of it will ever come. */
Test(record_stream, a_signal_without_samples_is_left_out)
{
    struct bytes bytes = file_bytes(true, 0);
    struct input input = {0};
    memcpy(bytes.data + 256 + 216 * 3, "0       ", 8);
    size_t record = bytes.record - 3 * FAST;
    memmove(bytes.data + bytes.header, bytes.data + bytes.header + 3 * FAST, record);
    input_put_n(&input, bytes.data, bytes.header + record);
    struct stream_log log = input_play(&input);
    cr_assert_eq(log.channel_count, 1);
    cr_expect_str_eq(log.labels[0], "Temp");
    cr_expect_eq(log.block_count, 1);
    cr_expect_float_eq((double)log.values[0], (double)value(1, 0), 0.01);
    stream_log_free(&log);
}

/* What is at the other end may be another device by the time it comes back. */
Test(record_stream, lines_after_a_break_of_records_and_records_again)
{
    for (int bdf = 0; bdf < 2; bdf++) {
        struct bytes bytes = file_bytes(bdf, 0);
        struct input input = {0};
        input_put_n(&input, bytes.data, bytes.size);
        input_break(&input);
        input_put(&input, "t,ECG II [mV],EDA [uS]\r\n");
        for (int i = 0; i < 12; i++)
            input_put(&input, "%d,1,2\r\n", i);
        input_break(&input);
        input_put_n(&input, bytes.data, bytes.size);
        input_break(&input);
        input_put(&input, "abc"); /* of nothing that could be told */
        input_break(&input);
        input_put(&input, "\n");
        input_put_n(&input, bytes.data, bytes.size);
        struct stream_log log = input_play(&input);
        cr_assert_eq(log.headers, 4);
        cr_expect_eq(log.block_count, 3 * RECORDS + 12);
        cr_expect_gt(log.garbled, 3);
        expect_records(&log, 0, 0, RECORDS);
        stream_log_free(&log);
    }
}
