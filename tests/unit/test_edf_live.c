/*
 * test_edf_live.c - what a file needs to be written while it streams: missing samples, short
 * records, records that are tried again, reading back while it grows, and repair after a crash.
 */
#include <criterion/criterion.h>

#include <edflib.h>
#include <math.h>
#include <pthread.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/resource.h>
#include <sys/stat.h>
#include <unistd.h>

#include "recording/edf_readback.h"
#include "recording/edf_repair.h"
#include "recording/edf_writer.h"
#include "recording/recording.h"

enum { FAST = 25, SLOW = 2, RECORD = FAST + SLOW };

static char folder[] = "/tmp/incisura-live-XXXXXX";
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

TestSuite(edf_live, .init = set_up, .fini = tear_down);

static const struct edf_channel_spec channels[] = {
    {"ECG II", "mV", "an electrode with a description that fills the whole field of eighty, or so",
     "HP:0.05Hz", -20, 20, 0, 0, FAST},
    {"Temp", "degC", "", "", 45, 10, -2000, 2000, SLOW}, /* a negative gain */
};

/* 100 ms records at 250 and 20 Hz, starting a quarter of a second and a bit after a whole one. */
static const struct edf_spec base = {
    .bdf = true,
    .discontinuous = true,
    .lowest_is_missing = true,
    .start_civil_ns = 1937033700250000003,
    .record_ns = 100 * NS_PER_MS,
    .channels = channels,
    .channel_count = 2,
};

/* Sample k of a channel; some are missing, the lowest value there is occurs too. */
static float value(int channel, int64_t k)
{
    if (k % 17 == 5)
        return NAN;
    if (k % 29 == 3)
        return channel ? 45 : -20;
    return channel ? 30 + (float)(k % 100) / 10 : 10 * sinf(0.01f * (float)k);
}

static void fill(float *record, int64_t at)
{
    for (int i = 0; i < FAST; i++)
        record[i] = value(0, at * FAST + i);
    for (int i = 0; i < SLOW; i++)
        record[FAST + i] = value(1, at * SLOW + i);
}

static struct edf_writer *open_writer(const struct edf_spec *spec)
{
    struct edf_writer *writer = NULL;
    struct err err = {0};
    cr_assert_eq(edf_writer_open(path, spec, &writer, &err), 0, "%s", err.text);
    return writer;
}

static int put(struct edf_writer *writer, int64_t at, int64_t onset_ns, struct err *err)
{
    float record[RECORD];
    fill(record, at);
    return edf_writer_record(writer, onset_ns, record, err);
}

static void put_all(struct edf_writer *writer, int records)
{
    struct err err = {0};
    for (int i = 0; i < records; i++)
        cr_assert_eq(put(writer, i, i * base.record_ns, &err), 0, "%s", err.text);
}

static struct recording *open_file(void)
{
    static const struct reader_options none = {0};
    struct recording *recording = NULL;
    struct err err = {0};
    cr_assert_eq(recording_open(path, &none, &recording, &err), 0, "%s", err.text);
    return recording;
}

/* A step of the converter: the lowest value is moved up by one. */
static bool near(int channel, float got, int64_t k)
{
    float want = value(channel, k);
    double step = channel ? 35.0 / 4000 : 40.0 / 16777215;
    return isnan(want) ? isnan(got) : fabs((double)got - (double)want) <= step + 2e-6;
}

static void expect_samples(int channel, const float *got, int64_t first, int64_t count)
{
    for (int64_t i = 0; i < count; i++)
        cr_assert(near(channel, got[i], first + i), "channel %d, sample %lld: %g, not %g", channel,
                  (long long)(first + i), (double)got[i], (double)value(channel, first + i));
}

Test(edf_live, missing_samples_come_back_as_missing)
{
    enum { RECORDS = 40 };
    for (int bdf = 0; bdf < 2; bdf++) {
        struct edf_spec spec = base;
        struct err err = {0};
        float samples[RECORDS * FAST], low, high;
        spec.bdf = bdf;
        struct edf_writer *writer = open_writer(&spec);
        put_all(writer, RECORDS);
        cr_expect_eq(edf_writer_clipped(writer), 0);
        cr_assert_eq(edf_writer_close(writer, &err), 0, "%s", err.text);
        struct recording *recording = open_file();
        const struct recording_info *info = recording_info(recording);
        cr_expect_str_eq(info->format, bdf ? "BDF+C" : "EDF+C", "no gap was left");
        cr_expect_eq(info->start_civil_ns, spec.start_civil_ns);
        cr_assert_eq(info->channel_count, 2);
        cr_expect_str_eq(info->channels[1].transducer, EDF_MISSING_WORDS);
        cr_expect_eq(strlen(info->channels[0].transducer), 80);
        cr_assert_eq(recording_read(recording, 1, 0, RECORDS * SLOW, samples, &err), 0);
        expect_samples(1, samples, 0, RECORDS * SLOW);
        cr_assert_eq(recording_read(recording, 0, 0, RECORDS * FAST, samples, &err), 0);
        for (int k = 0; k < RECORDS * FAST; k++)
            cr_assert_eq(isnan(samples[k]), isnan(value(0, k)));
        cr_assert_eq(recording_minmax(recording, 0, 5, 1, &low, &high, &err), 0);
        cr_expect(isnan(low) && isnan(high), "one missing sample alone");
        cr_assert_eq(recording_minmax(recording, 0, 4, 3, &low, &high, &err), 0);
        cr_expect(low == samples[4] && high == samples[6]);
        recording_close(recording);
        (void)unlink(path);
    }
}

Test(edf_live, edflib_opens_a_file_with_missing_samples)
{
    enum { RECORDS = 40 };
    struct edf_hdr_struct header;
    double samples[RECORDS * FAST];
    struct err err = {0};
    struct edf_writer *writer = open_writer(&base);
    put_all(writer, RECORDS);
    cr_assert_eq(edf_writer_close(writer, &err), 0, "%s", err.text);
    cr_assert_eq(edfopen_file_readonly(path, &header, EDFLIB_READ_ALL_ANNOTATIONS), 0, "%d",
                 header.filetype);
    cr_expect_eq(header.filetype, EDFLIB_FILETYPE_BDFPLUS);
    cr_expect_eq(header.datarecord_duration, EDFLIB_TIME_DIMENSION / 10);
    cr_assert_eq(edfread_physical_samples(header.handle, 0, RECORDS * FAST, samples),
                 RECORDS * FAST);
    for (int k = 0; k < RECORDS * FAST; k++) {
        if (isnan(value(0, k)))
            cr_assert_float_eq(samples[k], -20, 1e-9);
        else
            cr_assert(near(0, (float)samples[k], k) && samples[k] > -20);
    }
    (void)edfclose_file(header.handle);
}

Test(edf_live, onsets_keep_their_nanoseconds)
{
    static const int64_t onsets[] = {0, 100000000, 86400000000007, 86400100000008,
                                     86400000000000001};
    struct err err = {0};
    struct edf_writer *writer = open_writer(&base);
    for (int i = 0; i < 5; i++)
        cr_assert_eq(put(writer, i, onsets[i], &err), 0, "%s", err.text);
    cr_assert_neq(put(writer, 5, onsets[4] + 1, &err), 0, "a record inside the last one");
    cr_assert_eq(edf_writer_close(writer, &err), 0);
    struct recording *recording = open_file();
    const struct recording_info *info = recording_info(recording);
    cr_expect_str_eq(info->format, "BDF+D");
    const struct channel *ecg = &info->channels[0];
    cr_assert_eq(ecg->run_count, 3, "1 ns late is no gap");
    cr_expect_eq(ecg->runs[1].start_ns, onsets[2]);
    cr_expect_eq(ecg->runs[2].start_ns, onsets[4]);
    cr_expect_eq(info->start_civil_ns, base.start_civil_ns);
    recording_close(recording);
}

/* ---- trying again ---- */

Test(edf_live, a_record_that_failed_is_written_again_at_its_place)
{
    enum { RECORDS = 28 };
    struct err err = {0};
    float samples[RECORDS * FAST];
    int failures = 0;
    (void)signal(SIGXFSZ, SIG_IGN);
    struct edf_writer *writer = open_writer(&base);
    cr_assert_eq(edf_writer_annotate(writer, 5, 0, "told once", &err), 0);
    struct stat status;
    cr_assert_eq(stat(path, &status), 0);
    for (int i = 0; i < RECORDS; i++) {
        /* The disk fills up after more and more bytes of the record, and is emptied again. */
        struct rlimit limit = {(rlim_t)status.st_size + (rlim_t)(7 * i), RLIM_INFINITY};
        cr_assert_eq(setrlimit(RLIMIT_FSIZE, &limit), 0);
        failures += put(writer, i, i * base.record_ns, &err) != 0;
        limit.rlim_cur = RLIM_INFINITY;
        cr_assert_eq(setrlimit(RLIMIT_FSIZE, &limit), 0);
        cr_assert_eq(edf_writer_records(writer), i);
        cr_assert_eq(put(writer, i, i * base.record_ns, &err), 0, "%s", err.text);
        cr_assert_eq(stat(path, &status), 0);
    }
    cr_expect_eq(failures, RECORDS);
    cr_assert_eq(edf_writer_close(writer, &err), 0);
    struct recording *recording = open_file();
    cr_assert_eq(recording_info(recording)->channels[0].samples, RECORDS * FAST);
    cr_expect_eq(recording_info(recording)->annotation_count, 1);
    cr_assert_eq(recording_read(recording, 0, 0, RECORDS * FAST, samples, &err), 0);
    expect_samples(0, samples, 0, RECORDS * FAST);
    recording_close(recording);
}

/* ---- reading back ---- */

struct appending {
    struct edf_writer *writer;
    struct edf_readback *readback;
    int records;
    int failed;
};

static void *append(void *context)
{
    struct appending *job = context;
    for (int i = 0; i < job->records && !job->failed; i++) {
        job->failed = put(job->writer, i, i * base.record_ns, NULL);
        edf_readback_advance(job->readback, edf_writer_records(job->writer));
    }
    return NULL;
}

Test(edf_live, samples_are_read_back_while_the_file_grows)
{
    enum { RECORDS = 4000 };
    struct err err = {0};
    struct appending job = {open_writer(&base), NULL, RECORDS, 0};
    pthread_t thread;
    static float samples[RECORDS * FAST];
    cr_assert_eq(edf_readback_open(job.writer, &job.readback, &err), 0, "%s", err.text);
    cr_assert_neq(edf_readback_read(job.readback, 0, 0, 1, samples, &err), 0, "nothing is there");
    cr_assert_eq(pthread_create(&thread, NULL, append, &job), 0);
    uint32_t state = 1;
    for (int64_t there = 0; there < RECORDS * FAST;) {
        there = edf_readback_samples(job.readback, 0);
        if (there == 0)
            continue;
        state = state * 1664525u + 1013904223u;
        int64_t first = (int64_t)(state >> 8) % there;
        int64_t count = there - first < 3000 ? there - first : 3000;
        cr_assert_eq(edf_readback_read(job.readback, 0, first, count, samples, &err), 0, "%s",
                     err.text);
        expect_samples(0, samples, first, count);
    }
    (void)pthread_join(thread, NULL);
    cr_assert_eq(job.failed, 0);
    cr_expect_neq(edf_readback_read(job.readback, 0, RECORDS * FAST - 1, 2, samples, &err), 0);
    cr_assert_eq(edf_writer_close(job.writer, &err), 0, "%s", err.text);
    cr_assert_eq(edf_readback_read(job.readback, 1, 0, RECORDS * SLOW, samples, &err), 0,
                 "still readable after closing: %s", err.text);
    expect_samples(1, samples, 0, RECORDS * SLOW);
    edf_readback_free(job.readback);
}

/* ---- repair ---- */

static off_t size_of(void)
{
    struct stat status;
    cr_assert_eq(stat(path, &status), 0);
    return status.st_size;
}

/* Three records whose end is cut off byte by byte. */
Test(edf_live, a_crash_at_any_byte_of_the_last_record_is_repaired)
{
    struct err err = {0};
    float samples[3 * FAST];
    struct edf_writer *writer = open_writer(&base);
    put_all(writer, 2);
    off_t two = size_of();
    cr_assert_eq(put(writer, 2, 2 * base.record_ns, &err), 0);
    edf_writer_abandon(writer);
    off_t three = size_of();
    for (off_t cut = three; cut >= two; cut--) {
        struct edf_hdr_struct header;
        int records = cut == three ? 3 : 2;
        writer = NULL;
        (void)unlink(path);
        writer = open_writer(&base);
        put_all(writer, 3);
        edf_writer_abandon(writer);
        cr_assert_eq(truncate(path, cut), 0);
        cr_assert_eq(edf_repair(path, &err), 0, "%s", err.text);
        cr_assert_eq(size_of(), records == 3 ? three : two);
        cr_assert_eq(edf_repair(path, &err), 0, "again: %s", err.text);
        struct recording *recording = open_file();
        cr_assert_eq(recording_info(recording)->note_count, 0);
        cr_assert_eq(recording_info(recording)->channels[0].samples, records * FAST);
        cr_assert_eq(recording_read(recording, 0, 0, records * FAST, samples, &err), 0);
        expect_samples(0, samples, 0, records * FAST);
        recording_close(recording);
        cr_assert_eq(edfopen_file_readonly(path, &header, EDFLIB_READ_ANNOTATIONS), 0);
        cr_assert_eq(header.datarecords_in_file, records);
        (void)edfclose_file(header.handle);
    }
}

Test(edf_live, records_that_a_power_cut_left_empty_are_cut_off)
{
    struct err err = {0};
    struct edf_writer *writer = open_writer(&base);
    put_all(writer, 3);
    edf_writer_abandon(writer);
    off_t three = size_of();
    cr_assert_eq(truncate(path, 2 * three), 0); /* grown by zeros */
    cr_assert_eq(edf_repair(path, &err), 0, "%s", err.text);
    cr_expect_eq(size_of(), three);
}

Test(edf_live, what_needs_no_repair_is_left_alone)
{
    struct err err = {0};
    struct edf_writer *writer = open_writer(&base);
    put_all(writer, 3);
    cr_assert_eq(edf_writer_close(writer, &err), 0);
    off_t size = size_of();
    cr_assert_eq(truncate(path, size + 5), 0);
    cr_assert_eq(edf_repair(path, &err), 0);
    cr_expect_eq(size_of(), size + 5, "a count that stands is not ours to doubt");
    cr_assert_eq(truncate(path, 300), 0);
    cr_assert_eq(edf_repair(path, &err), 0, "its count stands: %s", err.text);
    (void)unlink(path);
    cr_expect_eq(edf_repair(path, &err), ERR_IO);
    writer = open_writer(&base);
    edf_writer_abandon(writer);
    cr_assert_eq(truncate(path, 300), 0);
    cr_expect_eq(edf_repair(path, &err), ERR_FORMAT, "cut off inside its header");
    cr_assert_eq(truncate(path, 0), 0);
    cr_expect_eq(edf_repair(path, &err), ERR_FORMAT);
    (void)unlink(path);
    writer = open_writer(&base); /* no record at all, and one with a gap */
    edf_writer_abandon(writer);
    cr_assert_eq(edf_repair(path, &err), 0, "%s", err.text);
    (void)unlink(path);
    writer = open_writer(&base);
    put_all(writer, 2);
    cr_assert_eq(put(writer, 2, NS_PER_S, &err), 0);
    edf_writer_abandon(writer);
    cr_assert_eq(edf_repair(path, &err), 0, "%s", err.text);
    struct recording *recording = open_file();
    cr_expect_str_eq(recording_info(recording)->format, "BDF+D");
    recording_close(recording);
}
