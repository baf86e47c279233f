/*
 * test_edf_damage.c - an EDF+D file cut at every length and damaged at every header byte: opened or
 * refused in one line, never a crash, and every channel can be read.
 */
#include <criterion/criterion.h>

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "recording/edf_writer.h"
#include "recording/recording.h"

enum { RECORDS = 4, SAMPLES = 20 };

/* The bytes of a small file with two rates, annotations and a gap; *size is set, caller frees. */
static uint8_t *make_file(size_t *size)
{
    static const struct edf_channel_spec channels[] = {
        {"ECG", "mV", "", "", -5, 5, 0, 0, SAMPLES - 4}, {"Temp", "degC", "", "", 20, 45, 0, 0, 4}};
    static const struct edf_spec spec = {.discontinuous = true,
                                         .start_civil_ns = 1937033700250000000,
                                         .record_ns = NS_PER_S,
                                         .annotation_bytes = 64,
                                         .channels = channels,
                                         .channel_count = 2};
    char folder[] = "/tmp/incisura-damage-XXXXXX", path[64];
    struct edf_writer *writer = NULL;
    struct err err = {0};
    cr_assert_not_null(mkdtemp(folder));
    (void)snprintf(path, sizeof path, "%s/a.edf", folder);
    cr_assert_eq(edf_writer_open(path, &spec, &writer, &err), 0, "%s", err.text);
    cr_assert_eq(edf_writer_annotate(writer, NS_PER_S, 0, "incision", &err), 0);
    for (int i = 0; i < RECORDS; i++) {
        float record[SAMPLES];
        for (int k = 0; k < SAMPLES; k++)
            record[k] = (float)(i + k) / 10 + (k >= SAMPLES - 4 ? 20 : 0);
        cr_assert_eq(edf_writer_record(writer, (i + (i > 1)) * NS_PER_S, record, &err), 0);
    }
    cr_assert_eq(edf_writer_close(writer, &err), 0);
    struct mapped mapped;
    cr_assert_eq(disk_files.map(&disk_files, path, &mapped, &err), 0);
    uint8_t *copy = malloc(mapped.size);
    memcpy(copy, mapped.data, mapped.size);
    *size = mapped.size;
    disk_files.unmap(&disk_files, &mapped);
    (void)unlink(path);
    (void)rmdir(folder);
    return copy;
}

static void read_all(const struct recording *recording)
{
    const struct recording_info *info = recording_info(recording);
    for (size_t i = 0; i < info->channel_count; i++) {
        const struct channel *channel = &info->channels[i];
        float values[256], low, high, least = INFINITY, greatest = -INFINITY;
        int64_t count = channel->samples < 256 ? channel->samples : 256;
        int64_t first = channel->samples - count;
        cr_assert_eq(recording_read(recording, i, first, count, values, NULL), 0);
        cr_assert_eq(recording_minmax(recording, i, first, count, &low, &high, NULL), 0);
        for (int64_t k = 0; k < count; k++) {
            least = fminf(least, values[k]);
            greatest = fmaxf(greatest, values[k]);
        }
        cr_assert(count == 0 || (low == least && high == greatest));
        int64_t end = 0;
        for (size_t k = 0; k < channel->run_count; k++) {
            cr_assert(channel->runs[k].start_ns >= end && channel->runs[k].span_ns > 0);
            end = run_end_ns(&channel->runs[k]);
        }
    }
}

/* Opens the bytes in a block of exactly their size, so that the sanitizer sees any step outside.
 * True when it could be opened. */
static bool attempt(const uint8_t *bytes, size_t size)
{
    uint8_t *exact = malloc(size ? size : 1);
    memcpy(exact, bytes, size);
    struct memory_file files[] = {{"a.edf", exact, size}};
    struct memory_files space;
    struct recording *recording = NULL;
    struct err err = {0};
    memory_files_init(&space, files, 1);
    struct reader_options options = {.files = &space.space};
    bool opened = recording_open("a.edf", &options, &recording, &err) == 0;
    if (opened) {
        read_all(recording);
        recording_close(recording);
    } else {
        cr_assert(strstr(err.text, "a.edf") && !strchr(err.text, '\n'), "%s", err.text);
    }
    free(exact);
    return opened;
}

Test(edf_damage, every_length)
{
    size_t size;
    uint8_t *bytes = make_file(&size);
    size_t header = 256 * 4, opened = 0;
    for (size_t length = 0; length <= size; length++) {
        bool good = attempt(bytes, length);
        opened += good;
        cr_assert_eq(good, length >= header, "length %zu", length);
    }
    cr_expect_eq(opened, size - header + 1);
    free(bytes);
}

Test(edf_damage, every_header_byte)
{
    static const uint8_t hostile[] = {0, ' ', '9', '-', 0xFF};
    size_t size, opened = 0;
    uint8_t *bytes = make_file(&size);
    for (size_t at = 0; at < 256 * 4; at++) {
        for (size_t i = 0; i < sizeof hostile; i++) {
            uint8_t before = bytes[at];
            bytes[at] = hostile[i];
            opened += attempt(bytes, size);
            bytes[at] = before;
        }
    }
    cr_expect_gt(opened, 256 * 4, "most damage to texts does no harm");
    free(bytes);
}

Test(edf_damage, every_annotation_byte)
{
    static const uint8_t hostile[] = {0, 0x14, 0x15, '+', '9', 0xFF};
    size_t size;
    uint8_t *bytes = make_file(&size);
    for (int record = 0; record < RECORDS; record++) {
        size_t from = 256 * 4 + (size_t)record * (SAMPLES * 2 + 64) + SAMPLES * 2;
        for (size_t at = from; at < from + 64; at++) {
            for (size_t i = 0; i < sizeof hostile; i++) {
                uint8_t before = bytes[at];
                bytes[at] = hostile[i];
                cr_assert(attempt(bytes, size), "samples can always be used");
                bytes[at] = before;
            }
        }
    }
    free(bytes);
}

/* What makers do wrong, and how it is told. */
Test(edf_damage, tolerated_with_a_note)
{
    static const struct {
        size_t at;
        const char *text, *note;
    } rows[] = {
        {168, "31.02.31", "no date"},
        {176, "08:55:00", NULL}, /* colons: there is only one way to read them */
        {184, "999     ", "bytes 184..191"},
        {236, "9       ", "the file ends after"},
        {236, "2       ", "the size makes"},
        {236, "-1      ", "-1"},
        {256 + 3 * 104, "-5,0    ", "decimal comma"},
        {256 + 3 * 104, "5       ", "say no range"},
        {256 + 3 * 120, "32767   ", "not above its minimum"},
        {256 + 3 * 96, "\xB5V     ", "not ASCII"},
    };
    size_t size;
    uint8_t *bytes = make_file(&size);
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        uint8_t *copy = malloc(size);
        memcpy(copy, bytes, size);
        memcpy(copy + rows[i].at, rows[i].text, strlen(rows[i].text));
        struct memory_file files[] = {{"a.edf", copy, size}};
        struct memory_files space;
        struct recording *recording = NULL;
        struct err err = {0};
        memory_files_init(&space, files, 1);
        struct reader_options options = {.files = &space.space};
        cr_assert_eq(recording_open("a.edf", &options, &recording, &err), 0, "%s", err.text);
        const struct recording_info *info = recording_info(recording);
        cr_expect_eq(info->note_count, rows[i].note ? 1 : 0, "row %zu", i);
        if (rows[i].note && info->note_count > 0)
            cr_expect_not_null(strstr(info->notes[0], rows[i].note), "row %zu: %s", i,
                               info->notes[0]);
        recording_close(recording);
        free(copy);
    }
    free(bytes);
}

/* Ten thousand channels of one name are told apart without taking for ever. */
Test(edf_damage, many_channels_of_one_name)
{
    enum { CHANNELS = 9999 };
    size_t header = 256 * (CHANNELS + 1), size = header + 2 * CHANNELS;
    uint8_t *bytes = malloc(size);
    memset(bytes, ' ', size);
    memcpy(bytes, "0", 1);
    memcpy(bytes + 168, "20.05.3108.55.00", 16);
    memcpy(bytes + 236, "1", 1);
    memcpy(bytes + 244, "1", 1);
    memcpy(bytes + 252, "9999", 4);
    for (size_t i = 0; i < CHANNELS; i++) {
        memcpy(bytes + 256 + 16 * i, "EEG", 3);
        memcpy(bytes + 256 + 216 * CHANNELS + 8 * i, "1", 1);
    }
    struct memory_file files[] = {{"a.edf", bytes, size}};
    struct memory_files space;
    struct recording *recording = NULL;
    struct err err = {0};
    memory_files_init(&space, files, 1);
    struct reader_options options = {.files = &space.space};
    cr_assert_eq(recording_open("a.edf", &options, &recording, &err), 0, "%s", err.text);
    cr_expect_str_eq(recording_info(recording)->channels[0].label, "EEG");
    cr_expect_str_eq(recording_info(recording)->channels[CHANNELS - 1].label, "EEG #9999");
    recording_close(recording);
    free(bytes);
}

Test(edf_damage, records_that_make_centuries_are_refused)
{
    size_t size;
    uint8_t *bytes = make_file(&size);
    struct memory_file files[] = {{"a.edf", bytes, size}};
    struct memory_files space;
    struct recording *recording = NULL;
    struct err err = {0};
    memcpy(bytes + 244, "999999  ", 8);
    bytes = realloc(bytes, size * 4000);
    for (size_t i = 1; i < 4000; i++)
        memcpy(bytes + size * i, bytes + 256 * 4, size < 256 * 4 ? size : 256);
    memory_files_init(&space, files, 1);
    files[0].data = bytes;
    files[0].size = size * 4000;
    struct reader_options options = {.files = &space.space};
    cr_expect_neq(recording_open("a.edf", &options, &recording, &err), 0);
    cr_expect_not_null(strstr(err.text, "byte 244"), "%s", err.text);
    free(bytes);
}
