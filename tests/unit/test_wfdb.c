/*
 * test_wfdb.c - WFDB records from hand-assembled bytes.
 *
 * Byte values are those of the WFDB Applications Guide, signal(5) and annot(5), worked by hand
 * from the layouts given there; annotations and header of MIT-BIH record 100 as published.
 */
#include <criterion/criterion.h>

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "recording/recording.h"
#include "recording/wfdb_annotations.h"
#include "recording/wfdb_format.h"

Test(wfdb, packed_formats_give_the_guides_values)
{
    static const struct {
        int format;
        uint8_t bytes[4];
        size_t size;
        int32_t values[3];
        int64_t count;
    } rows[] = {
        {212, {0xe3, 0x33, 0xf3}, 3, {995, 1011}, 2},
        {212, {0xff, 0x8f, 0x00}, 3, {-1, -2048}, 2},
        {212, {0xff, 0xf7, 0xfb}, 3, {2047, -5}, 2},
        {212, {0xe3, 0x33}, 2, {995}, 1},
        {310, {0xc8, 0x60, 0x70, 0x4e}, 4, {100, -200, 300}, 3},
        {310, {0xfe, 0x07, 0xfe, 0x83}, 4, {-1, 511, -512}, 3},
        {311, {0x64, 0xe0, 0xcc, 0x12}, 4, {100, -200, 300}, 3},
        {311, {0x01, 0x08, 0x30, 0x00}, 4, {1, 2, 3}, 3},
        {16, {0xff, 0xff, 0x01, 0x00}, 4, {-1, 1}, 2},
        {61, {0xff, 0xff, 0x00, 0x01}, 4, {-1, 1}, 2},
        {160, {0xff, 0x7f, 0x01, 0x80}, 4, {-1, 1}, 2},
        {80, {0x00, 0x80, 0xff}, 3, {-128, 0, 127}, 3},
        {24, {0x00, 0x00, 0x80}, 3, {-8388608}, 1},
        {32, {0x40, 0xe2, 0x01, 0x00}, 4, {123456}, 1},
    };
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        cr_expect_eq(wfdb_format_samples(rows[i].format, rows[i].size), rows[i].count, "row %zu",
                     i);
        for (int64_t k = 0; k < rows[i].count; k++)
            cr_expect_eq(wfdb_format_get(rows[i].format, rows[i].bytes, k), rows[i].values[k],
                         "row %zu sample %d", i, (int)k);
    }
}

static struct recording *open_record(const struct memory_file *files, size_t count, struct err *err)
{
    static struct memory_files space;
    memory_files_init(&space, files, count);
    struct reader_options options = {.files = &space.space};
    struct recording *recording = NULL;
    int failed = recording_open(files[0].path, &options, &recording, err);
    return failed ? NULL : recording;
}

#define TEXT(path, text)                                \
    {                                                   \
        path, (const uint8_t *)(text), sizeof(text) - 1 \
    }

/* Skew, samples a frame, byte offset, gain and baseline, missing samples in one file. */
Test(wfdb, frames_skew_offset_and_missing)
{
    static const uint8_t samples[] = {
        0xAA, 0xAA,                                            /* the offset */
        10,   0,    100, 0, 101,  0,    20, 0, 102, 0, 103, 0, /* two frames of 1 + 2 samples */
        30,   0,    104, 0, 0x00, 0x80, 40, 0, 106, 0, 107, 0, /* -32768 = missing */
    };
    const struct memory_file files[] = {
        TEXT("d/r.hea", "r 2 10 4 08:30:00.5 20/5/2031\n"
                        "# a comment\n"
                        "r.dat 16:1+2 2(10)/mV 12 0 0 0 0 I\n"
                        "r.dat 16x2+2 10/mmHg 12 100 0 0 0 ABP\n"),
        {"d/r.dat", samples, sizeof samples},
    };
    struct err err = {0};
    struct recording *recording = open_record(files, 2, &err);
    cr_assert_not_null(recording, "%s", err.text);
    const struct recording_info *info = recording_info(recording);
    struct civil start = {2031, 5, 20, 8, 30, 0, 500 * NS_PER_MS};
    cr_expect_eq(info->start_civil_ns, civil_to_ns(&start));
    cr_expect_eq(info->channels[0].samples, 3);
    cr_expect_eq(info->channels[1].samples, 8);
    cr_expect_eq(info->channels[1].rate_hz, 20);
    cr_expect_eq(info->channels[0].role, ROLE_ECG);
    float lead[3], pressure[8];
    cr_assert_eq(recording_read(recording, 0, 0, 3, lead, &err), 0);
    cr_assert_eq(recording_read(recording, 1, 0, 8, pressure, &err), 0);
    cr_expect(lead[0] == 5 && lead[1] == 10 && lead[2] == 15, "skewed by one frame");
    cr_expect(pressure[0] == 0 && fabsf(pressure[3] - 0.3f) < 1e-6f);
    cr_expect(isnan(pressure[5]) && !isnan(pressure[6]));
    cr_expect_eq(info->part_count, 1);
    recording_close(recording);
}

Test(wfdb, differences_run_on_and_are_read_from_the_middle)
{
    static const uint8_t samples[] = {1, 0xFF, 2, 0xFE, 3, 0xFD};
    const struct memory_file files[] = {
        TEXT("r.hea", "r 2 10 3\nr.dat 8 1 10 0 100 0 0 a\nr.dat 8 1 10 0 -5 0 0 b\n"),
        {"r.dat", samples, sizeof samples},
    };
    struct err err = {0};
    struct recording *recording = open_record(files, 2, &err);
    cr_assert_not_null(recording, "%s", err.text);
    float value;
    cr_assert_eq(recording_read(recording, 0, 2, 1, &value, &err), 0);
    cr_expect_eq(value, 106);
    cr_assert_eq(recording_read(recording, 1, 2, 1, &value, &err), 0);
    cr_expect_eq(value, -11);
    recording_close(recording);
}

/* A variable layout: "b" is missing in the first segment, then a gap, then both. */
Test(wfdb, segments_gaps_and_absent_signals)
{
    static const uint8_t one[] = {1, 0, 2, 0}, two[] = {3, 0, 30, 0, 4, 0, 40, 0};
    const struct memory_file files[] = {
        TEXT("m.hea", "m/4 2 2 6\nlay 0\ns1 2\n~ 2\ns2 2\n"),
        TEXT("lay.hea", "lay 2 2 0\n~ 0 1/mV 0 0 0 0 0 a\n~ 0 1/mV 0 0 0 0 0 b\n"),
        TEXT("s1.hea", "s1 1 2 2\ns1.dat 16 1/mV 0 0 0 0 0 a\n"),
        {"s1.dat", one, sizeof one},
        TEXT("s2.hea", "s2 2 2 2\ns2.dat 16 1/mV 0 0 0 0 0 a\ns2.dat 16 10/mV 0 0 0 0 0 b\n"),
        {"s2.dat", two, sizeof two},
    };
    struct err err = {0};
    struct recording *recording = open_record(files, 6, &err);
    cr_assert_not_null(recording, "%s", err.text);
    const struct recording_info *info = recording_info(recording);
    cr_expect_eq(info->span_ns, 3 * NS_PER_S);
    cr_expect_eq(info->gap_count, 1);
    cr_expect(info->gaps[0].start_ns == NS_PER_S && info->gaps[0].span_ns == NS_PER_S);
    cr_expect_eq(info->channels[0].run_count, 2);
    cr_expect_eq(info->channels[1].run_count, 1);
    cr_expect_eq(info->channels[1].runs[0].start_ns, 2 * NS_PER_S);
    float a[4], b[2];
    cr_assert_eq(recording_read(recording, 0, 0, 4, a, &err), 0);
    cr_assert_eq(recording_read(recording, 1, 0, 2, b, &err), 0);
    cr_expect(a[0] == 1 && a[3] == 4 && b[0] == 3 && b[1] == 4);
    recording_close(recording);
}

/* "a" ends where "b" begins: no gap, as one of them is always there; then nobody, then "a". */
Test(wfdb, a_gap_is_where_no_channel_is)
{
    static const uint8_t two[] = {1, 0, 2, 0};
    const struct memory_file files[] = {
        TEXT("m.hea", "m/5 2 2 8\nlay 0\ns1 2\ns2 2\n~ 2\ns1 2\n"),
        TEXT("lay.hea", "lay 2 2 0\n~ 0 1/mV 0 0 0 0 0 a\n~ 0 1/mV 0 0 0 0 0 b\n"),
        TEXT("s1.hea", "s1 1 2 2\ns.dat 16 1/mV 0 0 0 0 0 a\n"),
        TEXT("s2.hea", "s2 1 2 2\ns.dat 16 1/mV 0 0 0 0 0 b\n"),
        {"s.dat", two, sizeof two},
    };
    struct err err = {0};
    struct recording *recording = open_record(files, 5, &err);
    cr_assert_not_null(recording, "%s", err.text);
    const struct recording_info *info = recording_info(recording);
    cr_assert_eq(info->gap_count, 1);
    cr_expect(info->gaps[0].start_ns == 2 * NS_PER_S && info->gaps[0].span_ns == NS_PER_S);
    cr_expect_eq(info->channels[0].run_count, 2);
    recording_close(recording);
}

/* The beginning of 100.atr as published: a rhythm note at 18, then beats. */
Test(wfdb, annotations_of_record_100)
{
    static const uint8_t bytes[] = {0x12, 0x70, 0x03, 0xfc, 0x28, 0x4e, 0x00,
                                    0x00, 0x3b, 0x04, 0x25, 0x05, 0x00, 0x00};
    struct arena arena = {0};
    struct annotation *made = NULL;
    size_t count = 0;
    struct err err = {0};
    cr_assert_eq(
        wfdb_annotations_read(bytes, sizeof bytes, "100.atr", 360, &arena, &made, &count, &err), 0);
    cr_assert_eq(count, 3);
    cr_expect_str_eq(made[0].kind, "+");
    cr_expect_str_eq(made[0].text, "(N");
    cr_expect_eq(made[0].onset_ns, 50 * NS_PER_MS); /* sample 18 */
    cr_expect_str_eq(made[1].kind, "N");
    cr_expect_eq(made[1].onset_ns, 213888889);  /* sample 77 */
    cr_expect_eq(made[2].onset_ns, 1027777778); /* sample 370 */
    free(made);
    arena_free(&arena);
}

Test(wfdb, skip_words_and_a_resolution_of_their_own)
{
    static const uint8_t skip[] = {0x00, 0xec, 0x00, 0x00, 0x88, 0x13, 0x00, 0x04, 0x00, 0x00};
    static const char note[] = "## time resolution: 500";
    uint8_t bytes[64] = {0x00, 0x58, sizeof note - 1, 0xfc};
    memcpy(bytes + 4, note, sizeof note - 1);
    size_t at = 4 + sizeof note; /* text and its pad byte */
    memcpy(bytes + at, skip, sizeof skip);
    struct arena arena = {0};
    struct annotation *made = NULL;
    size_t count = 0;
    struct err err = {0};
    cr_assert_eq(
        wfdb_annotations_read(bytes, at + sizeof skip, "x", 125, &arena, &made, &count, &err), 0,
        "%s", err.text);
    cr_assert_eq(count, 1);
    cr_expect_eq(made[0].onset_ns, 10 * NS_PER_S, "tick 5000 at 500 Hz");
    free(made);
    arena_free(&arena);
}

Test(wfdb, bad_headers_are_refused_with_their_line)
{
    static const struct {
        const char *text, *says;
    } rows[] = {
        {"", "empty file"},
        {"r\n", "r.hea:1: number of signals"},
        {"r x\n", "r.hea:1: number of signals 'x'"},
        {"r 1 0\n", "r.hea:1: sampling rate '0'"},
        {"r 1 10 -4\n", "r.hea:1: number of samples"},
        {"r 1 10 4 25:00:00\n", "r.hea:1: start time"},
        {"r 1 10 4\n", "r.hea:2: the line of signal 0"},
        {"r 1 10 4\nr.dat q\n", "r.hea:2: signal format 'q'"},
        {"r 1 10 4\nr.dat 16x0\n", "r.hea:2: signal format"},
        {"r 1 10 4\nr.dat 999\n", "format 999"},
        {"r 1 10 4\nr.dat 16 x\n", "r.hea:2: gain 'x'"},
        {"r/2 1 10 4\ns 1\n", "r.hea:3: a segment"},
        {"r 1 10 4\nabsent.dat 16\n", "absent.dat"},
        {"r 1 10 4\nr.dat 16+99 1\n", "r.dat: ends before byte 99"},
    };
    static const uint8_t samples[] = {1, 0, 2, 0};
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        const struct memory_file files[] = {
            {"r.hea", (const uint8_t *)rows[i].text, strlen(rows[i].text)},
            {"r.dat", samples, sizeof samples}};
        struct err err = {0};
        struct recording *recording = open_record(files, 2, &err);
        cr_expect_null(recording, "row %zu", i);
        cr_expect_not_null(strstr(err.text, rows[i].says), "row %zu: %s", i, err.text);
        recording_close(recording);
    }
}
