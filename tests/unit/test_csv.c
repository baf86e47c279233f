/*
 * test_csv.c - CSV of signals: times, rates, gaps, spellings, refusals.
 */
#include <criterion/criterion.h>

#include <math.h>
#include <string.h>
#include <zlib.h>

#include "base/str.h"
#include "recording/recording.h"

static struct recording *open_bytes(const void *bytes, size_t size, const char *name,
                                    double rate_hz, struct err *err)
{
    struct memory_file files[] = {{name, bytes, size}};
    struct memory_files space;
    struct recording *recording = NULL;
    memory_files_init(&space, files, 1);
    struct reader_options options = {.files = &space.space, .rate_hz = rate_hz};
    return recording_open(name, &options, &recording, err) ? NULL : recording;
}

static struct recording *open_text(const char *text)
{
    struct err err = {0};
    struct recording *recording = open_bytes(text, strlen(text), "a.csv", 0, &err);
    cr_assert_not_null(recording, "%s", err.text);
    return recording;
}

static float value(const struct recording *recording, size_t channel, int64_t sample)
{
    float out;
    struct err err = {0};
    cr_assert_eq(recording_read(recording, channel, sample, 1, &out, &err), 0, "%s", err.text);
    return out;
}

Test(csv, comma_point_units_and_empty_cells)
{
    struct recording *recording =
        open_text("t,ECG II [mV],NIBP (mm[Hg]),,text\n0,1.5,,7,a\n0.25,NaN,,8,b\n0.5,-3e-1,80,9,c\n"
                  "0.75,2,,10,d\n1.0,2,,11,e\n1.25,2,,12,f\n");
    const struct recording_info *info = recording_info(recording);
    cr_assert_eq(info->channel_count, 3);
    cr_expect_str_eq(info->channels[0].label, "ECG II");
    cr_expect_str_eq(info->channels[0].unit, "mV");
    cr_expect_str_eq(info->channels[1].unit, "mm[Hg]");
    cr_expect_str_eq(info->channels[2].label, "column 4");
    cr_expect_eq(info->channels[0].rate_hz, 4);
    cr_expect_eq(info->span_ns, 1500 * NS_PER_MS);
    cr_expect_eq(value(recording, 0, 0), 1.5f);
    cr_expect(isnan(value(recording, 0, 1)));
    cr_expect_eq(value(recording, 0, 2), -0.3f);
    cr_expect_not_null(info->channels[1].times_ns, "one value in six rows is a step trace");
    cr_expect_eq(info->channels[1].samples, 1);
    cr_expect_eq(info->channels[1].times_ns[0], 500 * NS_PER_MS);
    cr_assert_eq(info->note_count, 1);
    cr_expect_not_null(strstr(info->notes[0], "left out: 1"));
    recording_close(recording);
}

Test(csv, semicolons_decimal_commas_and_midnight)
{
    struct recording *recording = open_text("\xEF\xBB\xBF"
                                            "Time;HR [/min]\r\n23:59:58;61,5\r\n"
                                            "23:59:59,5;62\r\n00:00:04;63\r\n00:00:30;64\r\n");
    const struct recording_info *info = recording_info(recording);
    cr_expect_eq(info->start_civil_ns, NS_NONE);
    cr_assert_not_null(info->channels[0].times_ns, "irregular");
    cr_expect_eq(info->channels[0].times_ns[2], 6 * NS_PER_S, "past midnight");
    cr_expect_eq(value(recording, 0, 0), 61.5f);
    recording_close(recording);
}

Test(csv, missing_rows_are_a_gap_at_an_exact_rate)
{
    struct str text = {0};
    str_put(&text, "time [s]\tEDA [uS]\n");
    for (int k = 0; k < 400; k++) {
        if (k < 100 || k >= 150)
            str_putf(&text, "%.3f\t%d\n", k / 128.0, k);
    }
    struct err err = {0};
    struct recording *recording = open_bytes(text.text, text.length, "a.tsv", 0, &err);
    cr_assert_not_null(recording, "%s", err.text);
    const struct recording_info *info = recording_info(recording);
    cr_expect_eq(info->channels[0].rate_hz, 128, "times to the ms still say 128 Hz");
    cr_assert_eq(info->gap_count, 1);
    cr_expect_float_eq((double)info->gaps[0].span_ns / 1e9, 50 / 128.0, 0.001);
    cr_expect_eq(info->channels[0].run_count, 2);
    recording_close(recording);
    str_free(&text);
}

/* Six digits of a time above 100 s: neighbours at 125 Hz share one (met in public data sets). */
Test(csv, coarse_times_still_make_a_rate)
{
    struct str text = {0};
    str_put(&text, "t,a\n");
    for (int k = 0; k < 30000; k++)
        str_putf(&text, "%.6g,%d\n", k / 125.0, k);
    struct err err = {0};
    struct recording *recording = open_bytes(text.text, text.length, "a.csv", 0, &err);
    cr_assert_not_null(recording, "%s", err.text);
    const struct recording_info *info = recording_info(recording);
    cr_expect_eq(info->channels[0].rate_hz, 125);
    cr_expect_eq(info->channels[0].samples, 30000);
    cr_expect_eq(info->gap_count, 0);
    recording_close(recording);
    str_free(&text);
}

Test(csv, a_short_file_is_not_pulled_to_a_whole_rate)
{
    struct str text = {0};
    str_put(&text, "t,a\n");
    for (int k = 0; k < 40; k++)
        str_putf(&text, "%.3f,%d\n", k * 0.016, k);
    struct err err = {0};
    struct recording *recording = open_bytes(text.text, text.length, "a.csv", 0, &err);
    cr_expect_eq(recording_info(recording)->channels[0].rate_hz, 62.5);
    recording_close(recording);
    str_free(&text);
}

Test(csv, iso_times_give_the_start)
{
    struct recording *recording =
        open_text("timestamp,a\n2031-05-20T09:00:00.5,1\n2031-05-20T09:00:01,2\n");
    struct civil start = {2031, 5, 20, 9, 0, 0, 500 * NS_PER_MS};
    cr_expect_eq(recording_info(recording)->start_civil_ns, civil_to_ns(&start));
    recording_close(recording);
}

Test(csv, gzip_and_a_rate_instead_of_times)
{
    static const char text[] = "1,10\n2,20\n3,30\n";
    uint8_t packed[200];
    z_stream stream = {0};
    cr_assert_eq(deflateInit2(&stream, 9, Z_DEFLATED, 15 + 16, 8, Z_DEFAULT_STRATEGY), Z_OK);
    stream.next_in = (Bytef *)text;
    stream.avail_in = sizeof text - 1;
    stream.next_out = packed;
    stream.avail_out = sizeof packed;
    cr_assert_eq(deflate(&stream, Z_FINISH), Z_STREAM_END);
    size_t size = stream.total_out;
    (void)deflateEnd(&stream);
    struct err err = {0};
    struct recording *recording = open_bytes(packed, size, "a.csv.gz", 50, &err);
    cr_assert_not_null(recording, "%s", err.text);
    cr_expect_eq(recording_info(recording)->channel_count, 2);
    cr_expect_eq(recording_info(recording)->channels[1].rate_hz, 50);
    cr_expect_eq(value(recording, 1, 2), 30);
    recording_close(recording);
    cr_expect_null(open_bytes(packed, size - 9, "a.csv.gz", 50, &err), "cut off");
    cr_expect_not_null(strstr(err.text, "cut off or damaged"), "%s", err.text);
}

Test(csv, refusals_say_where)
{
    static const struct {
        const char *text, *says;
    } rows[] = {
        {"a,b\n1,2\n", "a.csv:1: no time column"},
        {"t\n1\n", "a.csv:1: a time column and no signal"},
        {"t,a\n", "no row that can be used"},
        {"t,a\n0,x\n1,y\n", "no column of numbers"},
        {"t,a\n5,1\n4,1\n3,1\n", "a.csv:3: time goes backwards"},
        {"t,a\n0,1\n1,\"2\n", "never closed"},
        {"\n\n", "no line in it"},
    };
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        struct err err = {0};
        cr_expect_null(open_bytes(rows[i].text, strlen(rows[i].text), "a.csv", 0, &err), "row %zu",
                       i);
        cr_expect_not_null(strstr(err.text, rows[i].says), "row %zu: %s", i, err.text);
    }
}

Test(csv, odd_rows_are_told)
{
    struct recording *recording = open_text("t,a,b\n0,1,1\n1,2\n2,x,3\nlate,4,4\n3,5,5,5\n4,6,6\n");
    const struct recording_info *info = recording_info(recording);
    cr_expect_eq(info->channels[0].samples, 5);
    cr_assert_eq(info->note_count, 3);
    cr_expect_not_null(strstr(info->notes[0], "usable time are left out: 1 (first on line 5)"));
    cr_expect_not_null(strstr(info->notes[1], "than the first line: 2"), "%s", info->notes[1]);
    cr_expect_not_null(strstr(info->notes[2], "taken as empty: 1 (first on line 4)"));
    recording_close(recording);
}
