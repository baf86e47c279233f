/*
 * test_edf.c - EDF+ and BDF+ against EDFlib (T. van Beelen) both ways, and against biosig: the same
 * samples, the same annotations.
 */
#include <criterion/criterion.h>

#include <edflib.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "biosig_oracle.h"
#include "recording/edf_writer.h"
#include "recording/recording.h"

enum { RECORDS = 7, FAST = 50, SLOW = 3 };

static char folder[] = "/tmp/incisura-edf-XXXXXX";
static char path[64];

static void set_up(void)
{
    cr_assert_not_null(mkdtemp(folder));
    (void)snprintf(path, sizeof path, "%s/a.edf", folder);
}

static void tear_down(void)
{
    (void)unlink(path);
    (void)rmdir(folder);
}

TestSuite(edf, .init = set_up, .fini = tear_down);

static const struct edf_channel_spec channels[] = {
    {"ECG II", "mV", "electrode", "HP:0.05Hz", -5.5, 4.5, 0, 0, FAST},
    {"Temp skin", "degC", "", "", 40, 10, -2048, 2047, SLOW}, /* a negative gain */
};

static const struct edf_spec base = {
    .subject = "S-7 F X X",
    .start_civil_ns = 1937033700250000000, /* 2031-05-20T08:55:00.25 */
    .record_ns = 500 * NS_PER_MS,
    .channels = channels,
    .channel_count = 2,
};

static float wave(int k)
{
    return 4 * sinf(0.1f * (float)k) - 0.5f;
}

static void fill(float *record, int at)
{
    for (int i = 0; i < FAST; i++)
        record[i] = wave(at * FAST + i);
    for (int i = 0; i < SLOW; i++)
        record[FAST + i] = 30 + (float)(at * SLOW + i) / 10;
}

/* Writes RECORDS records; `gap_at` > 0 leaves 2 s out before that record. */
static void write_file(bool bdf, int gap_at, bool finish)
{
    struct edf_spec spec = base;
    struct edf_writer *writer = NULL;
    struct err err = {0};
    float record[FAST + SLOW];
    spec.bdf = bdf;
    spec.discontinuous = gap_at > 0;
    cr_assert_eq(edf_writer_open(path, &spec, &writer, &err), 0, "%s", err.text);
    cr_assert_eq(edf_writer_annotate(writer, 1200 * NS_PER_MS, 0, "K\xC3\xBChlung", &err), 0);
    cr_assert_eq(edf_writer_annotate(writer, 2 * NS_PER_S, 25500 * NS_PER_MS, "cautery", &err), 0);
    for (int i = 0; i < RECORDS; i++) {
        int64_t late = gap_at > 0 && i >= gap_at ? 2 * NS_PER_S : 0;
        fill(record, i);
        cr_assert_eq(edf_writer_record(writer, i * spec.record_ns + late, record, &err), 0, "%s",
                     err.text);
    }
    cr_expect_eq(edf_writer_clipped(writer), 0);
    if (finish)
        cr_assert_eq(edf_writer_close(writer, &err), 0, "%s", err.text);
    else
        edf_writer_abandon(writer);
}

static struct recording *open_file(void)
{
    static const struct reader_options none = {0};
    struct recording *recording = NULL;
    struct err err = {0};
    cr_assert_eq(recording_open(path, &none, &recording, &err), 0, "%s", err.text);
    return recording;
}

/* Half a step of the converter, and float's own rounding. */
static double step_of(bool bdf)
{
    return 10.0 / (bdf ? 16777215 : 65535) / 2 + 1e-6;
}

Test(edf, edflib_reads_what_is_written)
{
    for (int bdf = 0; bdf < 2; bdf++) {
        struct edf_hdr_struct header;
        double samples[RECORDS * FAST];
        struct edf_annotation_struct note;
        write_file(bdf, 0, true);
        cr_assert_eq(edfopen_file_readonly(path, &header, EDFLIB_READ_ALL_ANNOTATIONS), 0, "%d",
                     header.filetype);
        cr_expect_eq(header.filetype, bdf ? EDFLIB_FILETYPE_BDFPLUS : EDFLIB_FILETYPE_EDFPLUS);
        cr_expect_eq(header.edfsignals, 2);
        cr_expect_eq(header.starttime_subsecond, 2500000);
        cr_expect_eq(header.datarecords_in_file, RECORDS);
        cr_assert_eq(edfread_physical_samples(header.handle, 0, RECORDS * FAST, samples),
                     RECORDS * FAST);
        for (int k = 0; k < RECORDS * FAST; k++)
            cr_assert_float_eq(samples[k], (double)wave(k), step_of(bdf), "sample %d", k);
        cr_assert_eq(header.annotations_in_file, 2);
        cr_assert_eq(edf_get_annotation(header.handle, 0, &note), 0);
        cr_expect_eq(note.onset, 12000000);
        cr_expect_str_eq(note.annotation, "K\xC3\xBChlung");
        cr_assert_eq(edf_get_annotation(header.handle, 1, &note), 0);
        cr_expect_str_eq((char *)note.duration, "25.5");
        (void)edfclose_file(header.handle);
        (void)unlink(path);
    }
}

Test(edf, biosig_reads_what_is_written)
{
    for (int bdf = 0; bdf < 2; bdf++) {
        double samples[RECORDS * FAST];
        write_file(bdf, 0, true);
        cr_assert_eq(biosig_channel(path, 0, RECORDS, RECORDS * FAST, samples), 0);
        for (int k = 0; k < RECORDS * FAST; k++)
            cr_assert_float_eq(samples[k], (double)wave(k), step_of(bdf), "sample %d", k);
        (void)unlink(path);
    }
}

Test(edf, what_is_written_is_read_back)
{
    for (int bdf = 0; bdf < 2; bdf++) {
        struct err err = {0};
        float samples[RECORDS * FAST], slow[RECORDS * SLOW], low, high;
        write_file(bdf, 0, true);
        struct recording *recording = open_file();
        const struct recording_info *info = recording_info(recording);
        cr_expect_str_eq(info->format, bdf ? "BDF+C" : "EDF+C");
        cr_expect_eq(info->start_civil_ns, base.start_civil_ns);
        cr_expect_eq(info->span_ns, RECORDS * base.record_ns);
        cr_expect_eq(info->channels[0].rate_hz, 100);
        cr_expect_eq(info->note_count, 0);
        cr_assert_eq(recording_read(recording, 0, 0, RECORDS * FAST, samples, &err), 0);
        cr_assert_eq(recording_read(recording, 1, 0, RECORDS * SLOW, slow, &err), 0);
        for (int k = 0; k < RECORDS * FAST; k++)
            cr_assert_float_eq((double)samples[k], (double)wave(k), step_of(bdf));
        cr_expect_float_eq(slow[20], 32, 0.01);
        cr_assert_eq(recording_minmax(recording, 1, 2, 15, &low, &high, &err), 0);
        cr_expect(low == slow[2] && high == slow[16], "a negative gain turns extremes round");
        cr_assert_eq(info->annotation_count, 2);
        cr_expect_eq(info->annotations[0].onset_ns, 1200 * NS_PER_MS);
        cr_expect_eq(info->annotations[1].span_ns, 25500 * NS_PER_MS);
        recording_close(recording);
        (void)unlink(path);
    }
}

Test(edf, a_gap_is_a_gap_and_a_crash_loses_nothing)
{
    struct err err = {0};
    float sample;
    write_file(false, 3, false);
    struct recording *recording = open_file();
    const struct recording_info *info = recording_info(recording);
    cr_expect_str_eq(info->format, "EDF+D");
    cr_assert_eq(info->gap_count, 1);
    cr_expect_eq(info->gaps[0].start_ns, 1500 * NS_PER_MS);
    cr_expect_eq(info->gaps[0].span_ns, 2 * NS_PER_S);
    cr_expect_eq(info->channels[0].run_count, 2);
    cr_expect_eq(info->channels[0].runs[1].start_ns, 3500 * NS_PER_MS);
    cr_expect_eq(info->channels[0].samples, RECORDS * FAST);
    cr_assert_eq(recording_read(recording, 0, 3 * FAST, 1, &sample, &err), 0);
    cr_expect_float_eq((double)sample, (double)wave(3 * FAST), step_of(false));
    cr_assert_eq(info->note_count, 1);
    cr_expect_not_null(strstr(info->notes[0], "-1"));
    recording_close(recording);
}

Test(edf, samples_out_of_range_are_clipped_and_counted)
{
    struct edf_spec spec = base;
    struct edf_writer *writer = NULL;
    struct err err = {0};
    float record[FAST + SLOW];
    fill(record, 0);
    record[3] = 100;
    record[4] = -100;
    record[5] = NAN;
    cr_assert_eq(edf_writer_open(path, &spec, &writer, &err), 0);
    cr_assert_eq(edf_writer_record(writer, 0, record, &err), 0);
    cr_expect_eq(edf_writer_clipped(writer), 3);
    cr_expect_neq(edf_writer_open(path, &spec, &writer, &err), 0, "an existing file is refused");
    cr_assert_eq(edf_writer_close(writer, &err), 0);
    struct recording *recording = open_file();
    cr_assert_eq(recording_read(recording, 0, 3, 3, record, &err), 0);
    cr_expect(record[0] == 4.5f && record[1] == -5.5f && record[2] == -5.5f);
    recording_close(recording);
}

Test(edf, annotations_wait_for_a_record_with_room)
{
    struct edf_spec spec = base;
    struct edf_writer *writer = NULL;
    struct err err = {0};
    float record[FAST + SLOW];
    fill(record, 0);
    cr_assert_eq(edf_writer_open(path, &spec, &writer, &err), 0);
    for (int i = 0; i < 10; i++)
        cr_assert_eq(
            edf_writer_annotate(writer, i * NS_PER_MS, 0, "thirty characters of text here", &err),
            0);
    for (int i = 0; i < 5; i++)
        cr_assert_eq(edf_writer_record(writer, 0, record, &err), 0);
    cr_assert_eq(edf_writer_close(writer, &err), 0, "%s", err.text);
    struct recording *recording = open_file();
    const struct recording_info *info = recording_info(recording);
    cr_assert_eq(info->annotation_count, 10);
    for (int i = 0; i < 10; i++)
        cr_expect_eq(info->annotations[i].onset_ns, i * NS_PER_MS);
    recording_close(recording);
}

/* EDFlib as the writer: two rates, a sub-second start, annotations. */
Test(edf, what_edflib_writes_is_read)
{
    for (int bdf = 0; bdf < 2; bdf++) {
        int handle = edfopen_file_writeonly(
            path, bdf ? EDFLIB_FILETYPE_BDFPLUS : EDFLIB_FILETYPE_EDFPLUS, 2);
        cr_assert_geq(handle, 0);
        double fast[200], slow[10];
        for (int i = 0; i < 2; i++) {
            cr_assert_eq(edf_set_samplefrequency(handle, i, i ? 10 : 200), 0);
            cr_assert_eq(edf_set_physical_maximum(handle, i, 1000), 0);
            cr_assert_eq(edf_set_physical_minimum(handle, i, -1000), 0);
            cr_assert_eq(edf_set_digital_maximum(handle, i, bdf ? 8388607 : 32767), 0);
            cr_assert_eq(edf_set_digital_minimum(handle, i, bdf ? -8388608 : -32768), 0);
            cr_assert_eq(edf_set_label(handle, i, i ? "slow" : "EEG Fp1"), 0);
            cr_assert_eq(edf_set_physical_dimension(handle, i, "uV"), 0);
        }
        cr_assert_eq(edf_set_startdatetime(handle, 2031, 5, 20, 8, 55, 0), 0);
        cr_assert_eq(edf_set_subsecond_starttime(handle, 1234567), 0);
        for (int record = 0; record < 3; record++) {
            for (int i = 0; i < 200; i++)
                fast[i] = 900 * sin(record * 200 + i);
            for (int i = 0; i < 10; i++)
                slow[i] = record * 10 + i;
            cr_assert_eq(edfwrite_physical_samples(handle, fast), 0);
            cr_assert_eq(edfwrite_physical_samples(handle, slow), 0);
        }
        cr_assert_eq(edfwrite_annotation_utf8(handle, 15000, 20000, "incision"), 0);
        cr_assert_eq(edfclose_file(handle), 0);
        struct recording *recording = open_file();
        const struct recording_info *info = recording_info(recording);
        struct err err = {0};
        float got[600];
        struct civil start = {2031, 5, 20, 8, 55, 0, 123456700};
        cr_expect_eq(info->start_civil_ns, civil_to_ns(&start));
        cr_expect_eq(info->channels[1].rate_hz, 10);
        cr_expect_eq(info->channels[0].role, ROLE_EEG);
        cr_assert_eq(recording_read(recording, 0, 0, 600, got, &err), 0);
        for (int k = 0; k < 600; k++)
            cr_assert_float_eq((double)got[k], 900 * sin(k), 2000.0 / 65535);
        cr_assert_eq(info->annotation_count, 1);
        /* EDFlib writes onsets to 0.1 ms, from the header's whole second. */
        cr_expect_lt(llabs(info->annotations[0].onset_ns - 1500 * NS_PER_MS), 100 * NS_PER_US);
        cr_expect_eq(info->annotations[0].span_ns, 2 * NS_PER_S);
        cr_expect_str_eq(info->annotations[0].text, "incision");
        recording_close(recording);
        (void)unlink(path);
    }
}
