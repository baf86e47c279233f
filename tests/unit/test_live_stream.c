/*
 * test_live_stream.c - a live stream fed by hand through to closed files: samples, gaps, parts,
 * ranges and clocks.
 */
#include <criterion/criterion.h>

#include <edflib.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "live_feed.h"

TestSuite(live_stream, .init = feed_set_up, .fini = feed_tear_down);

/* Records of a second of a 16-bit device, whose physical limits are not symmetric. */
static const struct stream_channel edf_channels[] = {
    {"ECG II", "mV", ROLE_ECG, "electrode", "HP:0.05Hz", -5.5, 4.5, -32768, 32767, 250},
    {"Temp", "degC", ROLE_TEMP, "", "", 10, 45, -2048, 2047, 10},
};
static const struct stream_header edf_header = {edf_channels, 2, NS_PER_S, 1};

/* Rows at 100 Hz: an ECG, and a number whose range must be learnt. */
static const struct stream_channel row_channels[] = {
    {"ECG II", "mV", ROLE_ECG, "", "", 0, 0, 0, 0, 1},
    {"Sättigung (lang benannt)", "", ROLE_NONE, "", "", 0, 0, 0, 0, 1},
};
static const struct stream_header rows = {row_channels, 2, NS_PER_S, 100};

static const double ecg_step = 40.0 / 16777215;

Test(live_stream, a_record_stream_comes_through_to_edflib)
{
    enum { SECONDS = 20 };
    struct edf_hdr_struct header;
    int digital[SECONDS * 250];
    double slow[SECONDS * 10];
    struct live_part part;
    struct err err = {0};
    struct feed feed = feed_start();
    feed_header(&feed, &edf_header);
    feed_blocks(&feed, SECONDS);
    feed_stop(&feed);
    cr_assert_eq(live_stream_part(feed.stream, 0, &part, &err), 0);
    cr_expect_str_eq(part.path, feed_path(1));
    cr_expect(part.closed && part.piece_count == 1);
    cr_expect_eq(live_stream_part(feed.stream, 1, &part, &err), ERR_USAGE);
    cr_assert_eq(edfopen_file_readonly(feed_path(1), &header, EDFLIB_READ_ALL_ANNOTATIONS), 0, "%d",
                 header.filetype);
    cr_expect_eq(header.filetype, EDFLIB_FILETYPE_BDFPLUS);
    cr_expect_eq(header.datarecord_duration, EDFLIB_TIME_DIMENSION / 10);
    cr_assert_eq(edfread_digital_samples(header.handle, 0, SECONDS * 250, digital), SECONDS * 250);
    cr_assert_eq(edfread_physical_samples(header.handle, 1, SECONDS * 10, slow), SECONDS * 10);
    for (int k = 0; k < SECONDS * 250; k++) {
        /* The device's own integers, bit for bit, and far below them the missing ones. */
        float want = feed_value(0, k);
        long own =
            isnan(want) ? -32768 - 65535 : lrint(((double)want + 5.5) / (10.0 / 65535) - 32768);
        cr_assert_eq(digital[k], own, "sample %d: %d, not %ld", k, digital[k], own);
    }
    for (int k = 0; k < SECONDS * 10; k++) {
        if (!isnan(feed_value(1, k)))
            cr_assert_float_eq(slow[k], (double)feed_value(1, k), 35.0 / 4095);
    }
    (void)edfclose_file(header.handle);
    struct recording *recording = feed_open(1);
    for (size_t i = 0; i < 2; i++)
        feed_expect_same(feed_trace(&feed, i, NULL), recording, i, i ? 35.0 / 4095 : 10.0 / 65535);
    recording_close(recording);
    live_stream_free(feed.stream);
}

/* 333.333 Hz, which no double holds: records of 34 rows are 102 ms exactly. */
Test(live_stream, rows_at_an_odd_rate_come_through_to_edflib)
{
    enum { ROWS = 34 * 100 };
    struct stream_header header = {row_channels, 2, 3 * NS_PER_S, 1000};
    struct edf_hdr_struct found;
    static double samples[ROWS];
    struct feed feed = feed_start();
    feed_header(&feed, &header);
    feed_blocks(&feed, ROWS);
    feed_stop(&feed);
    cr_assert_eq(edfopen_file_readonly(feed_path(1), &found, EDFLIB_READ_ALL_ANNOTATIONS), 0);
    cr_expect_eq(found.datarecord_duration, EDFLIB_TIME_DIMENSION * 102 / 1000);
    cr_assert_eq(edfread_physical_samples(found.handle, 0, ROWS, samples), ROWS);
    for (int k = 0; k < ROWS; k++) {
        float want = feed_value(0, k);
        cr_assert_float_eq(samples[k], isnan(want) ? -20 : (double)want, ecg_step);
    }
    (void)edfclose_file(found.handle);
    struct recording *recording = feed_open(1);
    const struct channel *channel = &recording_info(recording)->channels[1];
    cr_expect_str_eq(channel->label, "S?ttigung (lang");
    cr_expect_eq(channel->run_count, 1);
    cr_expect_eq(channel->runs[0].span_ns, ROWS * 3 * NS_PER_MS);
    for (size_t i = 0; i < 2; i++)
        feed_expect_same(feed_trace(&feed, i, NULL), recording, i, i ? 0.01 : ecg_step);
    recording_close(recording);
    live_stream_free(feed.stream);
}

/* ---- stretches ---- */

/* The one gap of part 1 after `seconds` of rows. */
static void expect_gap(struct feed *feed, int64_t from_ns, int64_t span_ns)
{
    feed_stop(feed);
    struct recording *recording = feed_open(1);
    const struct recording_info *info = recording_info(recording);
    cr_assert_eq(info->gap_count, 1);
    cr_expect_eq(info->gaps[0].start_ns, from_ns);
    cr_expect_eq(info->gaps[0].span_ns, span_ns, "a gap of %lld ns",
                 (long long)info->gaps[0].span_ns);
    const struct trace *trace = feed_trace(feed, 0, NULL);
    cr_assert_eq(trace->run_count, 2);
    cr_expect_eq(trace->runs[1].first, info->channels[0].runs[1].first);
    feed_expect_same(trace, recording, 0, ecg_step);
    cr_expect_eq(feed_status(feed).gaps, 1);
    recording_close(recording);
    live_stream_free(feed->stream);
}

Test(live_stream, a_reconnection_is_a_gap_of_the_right_length)
{
    struct live_part part;
    struct err err = {0};
    struct feed feed = feed_start();
    feed_header(&feed, &rows);
    feed_blocks(&feed, 505); /* half a record is padded */
    feed_break(&feed, 7300 * NS_PER_MS);
    feed_break(&feed, 0);
    feed_header(&feed, &rows);
    feed_blocks(&feed, 300);
    cr_expect_eq(feed_status(&feed).part_count, 1);
    cr_assert_eq(live_stream_part(feed.stream, 0, &part, &err), 0);
    cr_assert_eq(part.piece_count, 2);
    cr_expect_eq(part.pieces[0].at_ns, 0);
    cr_expect_eq(part.pieces[0].case_ns, 0);
    cr_expect_eq(part.pieces[1].at_ns, 5050 * NS_PER_MS + 7300 * NS_PER_MS);
    cr_expect_eq(part.pieces[1].case_ns, 5050 * NS_PER_MS + 7300 * NS_PER_MS);
    float padded[7];
    cr_assert_eq(trace_read(feed_trace(&feed, 0, NULL), 504, 7, padded, &err), 0);
    cr_expect(!isnan(padded[0]) && !isnan(padded[6]));
    for (int i = 1; i < 6; i++)
        cr_expect(isnan(padded[i]), "what was not received is missing");
    expect_gap(&feed, 5100 * NS_PER_MS, 7250 * NS_PER_MS);
}

/* Rows with a time of their own, which goes from from_ns on. */
static void feed_timed(struct feed *feed, int64_t from_ns, int count)
{
    for (int i = 0; i < count; i++)
        feed_block(feed, from_ns + i * 10 * NS_PER_MS);
}

Test(live_stream, own_time_that_jumps_ahead_is_a_gap_of_that_length)
{
    struct feed feed = feed_start();
    feed_header(&feed, &rows);
    feed_timed(&feed, 0, 500);
    feed_timed(&feed, 7 * NS_PER_S, 100); /* 2 s are missing, and came at once after them */
    expect_gap(&feed, 5 * NS_PER_S, 2 * NS_PER_S);
}

Test(live_stream, own_time_that_was_set_is_a_gap_by_the_laptops_clock)
{
    static const int64_t sets[] = {-3 * NS_PER_S, NS_PER_DAY, -NS_PER_DAY, 1937033700250000000};
    for (size_t i = 0; i < sizeof sets / sizeof *sets; i++) {
        struct feed feed = feed_start();
        feed_header(&feed, &rows);
        feed_timed(&feed, 0, 500);
        feed.came_ns += 1500 * NS_PER_MS;
        feed_timed(&feed, 5 * NS_PER_S + sets[i], 100);
        expect_gap(&feed, 5 * NS_PER_S, 1500 * NS_PER_MS);
        (void)remove(feed_path(1));
    }
}

Test(live_stream, jitter_and_a_rate_that_is_off_are_no_gap)
{
    struct feed feed = feed_start();
    uint32_t state = 3;
    feed_header(&feed, &rows);
    for (int64_t i = 0; i < 20000; i++) {
        state = state * 1664525u + 1013904223u;
        int64_t jitter_ns = (int64_t)(state >> 8) % (24 * NS_PER_MS) - 12 * NS_PER_MS;
        feed_block(&feed, i * 10 * NS_PER_MS + i * 20 * NS_PER_US + jitter_ns); /* 0.2 % off */
    }
    cr_expect_eq(feed_status(&feed).gaps, 0);
    cr_expect_eq(feed_trace(&feed, 0, NULL)->run_count, 1);
    feed_stop(&feed);
    live_stream_free(feed.stream);
}

Test(live_stream, a_small_jump_that_lasts_is_a_gap_after_all)
{
    struct feed feed = feed_start();
    feed_header(&feed, &rows);
    feed_timed(&feed, 0, 1000);
    feed_timed(&feed, 10 * NS_PER_S + 40 * NS_PER_MS, 1000);
    cr_expect_eq(feed_status(&feed).gaps, 1);
    const struct trace *trace = feed_trace(&feed, 0, NULL);
    cr_assert_eq(trace->run_count, 2);
    feed_stop(&feed);
    struct recording *recording = feed_open(1);
    const struct channel *channel = &recording_info(recording)->channels[0];
    cr_assert_eq(channel->run_count, 2);
    /* Seen about a second later; from then on samples lie where their own time says. */
    int64_t rows_before = channel->runs[1].start_ns - 40 * NS_PER_MS;
    cr_expect_lt(llabs(rows_before - 11 * NS_PER_S), 300 * NS_PER_MS);
    cr_expect_eq(rows_before % (10 * NS_PER_MS), 0);
    recording_close(recording);
    live_stream_free(feed.stream);
}

/* ---- parts ---- */

Test(live_stream, another_header_begins_another_part_and_the_same_does_not)
{
    struct stream_header only = {row_channels, 1, NS_PER_S, 100};
    struct feed feed = feed_start();
    size_t count;
    feed_header(&feed, &rows);
    feed_blocks(&feed, 250);
    feed_header(&feed, &rows);
    feed_blocks(&feed, 250);
    feed_header(&feed, &only);
    feed_blocks(&feed, 300);
    cr_expect_eq(feed_status(&feed).part_count, 2);
    const struct trace *first = feed_trace(&feed, 0, &count);
    cr_assert_eq(count, 3);
    feed_stop(&feed);
    cr_expect_eq(feed_trace(&feed, 0, &count), first, "a trace stays");
    struct recording *recording = feed_open(1);
    feed_expect_same(first, recording, 0, ecg_step);
    cr_expect_eq(recording_info(recording)->channels[0].samples, 500);
    recording_close(recording);
    recording = feed_open(2);
    const struct recording_info *info = recording_info(recording);
    cr_expect_eq(info->channel_count, 1);
    cr_expect_eq(info->channels[0].samples, 300);
    struct civil start = {2031, 5, 20, 8, 55, 5, 0};
    cr_expect_eq(info->start_civil_ns, civil_to_ns(&start));
    recording_close(recording);
    live_stream_free(feed.stream);
}

Test(live_stream, a_value_out_of_range_begins_a_wider_part)
{
    float row[2] = {1, 31};
    struct live_part part;
    struct err err = {0};
    struct feed feed = feed_start();
    feed_header(&feed, &rows);
    feed_blocks(&feed, 205);
    row[0] = -21;
    feed_values(&feed, NS_NONE, row);
    row[0] = 5000; /* wider than 16 times */
    feed_values(&feed, NS_NONE, row);
    row[0] = -21;
    feed_values(&feed, NS_NONE, row);
    row[0] = 1e9f; /* no header could say it */
    feed_values(&feed, NS_NONE, row);
    struct live_status status = feed_status(&feed);
    cr_expect_eq(status.part_count, 3);
    cr_expect_eq(status.garbled, 1);
    cr_expect_eq(status.gaps, 0);
    feed_stop(&feed);
    for (int number = 1; number <= 3; number++) {
        struct recording *recording = feed_open(number);
        size_t at = 2 * (size_t)(number - 1);
        feed_expect_same(feed_trace(&feed, at, NULL), recording, 0, ecg_step * 4096);
        float value;
        cr_assert_eq(recording_read(recording, 0, 0, 1, &value, &err), 0);
        if (number > 1)
            cr_expect_float_eq((double)value, number == 2 ? -21 : 5000, 0.01);
        recording_close(recording);
    }
    /* The parts follow one another on case time as their samples do. */
    cr_assert_eq(live_stream_part(feed.stream, 2, &part, &err), 0);
    cr_expect_eq(part.pieces[0].case_ns, 2060 * NS_PER_MS);
    live_stream_free(feed.stream);
}

Test(live_stream, a_declared_range_that_is_exceeded_keeps_its_steps)
{
    struct stream_header header = {&edf_channels[1], 1, NS_PER_S, 1};
    float block[10] = {11, 12, 13, 14, 15, 16, 17, 18, 19, 60};
    struct err err = {0};
    struct feed feed = feed_start();
    feed_header(&feed, &header);
    feed_values(&feed, NS_NONE, block);
    feed_stop(&feed);
    struct recording *recording = feed_open(1);
    float got[10];
    cr_assert_eq(recording_read(recording, 0, 0, 10, got, &err), 0);
    for (int i = 0; i < 10; i++) {
        double steps = ((double)got[i] - 10) / (35.0 / 4095);
        cr_expect_float_eq(steps, rint(steps), 1e-3);
        cr_expect_float_eq((double)got[i], (double)block[i], 35.0 / 4095);
    }
    recording_close(recording);
    live_stream_free(feed.stream);
}

/* What is not there for its whole first second has no range; then it comes. */
Test(live_stream, a_channel_that_begins_late_is_not_clipped)
{
    float row[2] = {0, NAN};
    struct err err = {0};
    struct feed feed = feed_start();
    feed_header(&feed, &rows);
    for (int i = 0; i < 150; i++)
        feed_values(&feed, NS_NONE, row);
    row[1] = 123456.75f;
    feed_values(&feed, NS_NONE, row);
    feed_stop(&feed);
    struct recording *recording = feed_open((int)feed_status(&feed).part_count);
    float got;
    cr_assert_eq(recording_read(recording, 1, 0, 1, &got, &err), 0);
    cr_expect_float_eq((double)got, (double)row[1], 0.1);
    recording_close(recording);
    live_stream_free(feed.stream);
}

Test(live_stream, files_that_are_there_are_left_alone)
{
    FILE *file = fopen(feed_path(1), "w");
    cr_assert_not_null(file);
    cr_assert_eq(fclose(file), 0);
    struct feed feed = feed_start();
    file = fopen(feed_path(2), "w"); /* appears after the numbers were looked at */
    cr_assert_not_null(file);
    cr_assert_eq(fclose(file), 0);
    struct live_part part;
    struct err err = {0};
    feed_header(&feed, &edf_header);
    feed_blocks(&feed, 2);
    feed_stop(&feed);
    cr_assert_eq(live_stream_part(feed.stream, 0, &part, &err), 0);
    cr_expect_str_eq(part.path, feed_path(3));
    recording_close(feed_open(3));
    live_stream_free(feed.stream);
}

Test(live_stream, nothing_that_came_is_no_file)
{
    struct feed feed = feed_start();
    size_t count = 9;
    cr_expect_null(feed_trace(&feed, 0, &count));
    cr_expect_eq(count, 0);
    feed_header(&feed, &rows);
    feed_break(&feed, NS_PER_S);
    feed_stop(&feed);
    cr_expect_eq(feed_status(&feed).part_count, 0);
    cr_expect(isnan(feed_status(&feed).drift_ppm));
    live_stream_free(feed.stream);
}

Test(live_stream, the_drift_of_the_stream_is_told)
{
    struct feed feed = feed_start();
    feed_header(&feed, &edf_header);
    for (int i = 0; i < 100; i++) {
        feed_block(&feed, NS_NONE);
        feed.came_ns += 50 * NS_PER_US;
    }
    cr_expect_float_eq(feed_status(&feed).drift_ppm, 50, 0.5);
    const struct trace *trace = feed_trace(&feed, 0, NULL);
    cr_assert_eq(trace->run_count, 1);
    cr_expect_float_eq((double)trace->runs[0].span_ns, 100.005e9, 1e5);
    feed_stop(&feed);
    live_stream_free(feed.stream);
}
