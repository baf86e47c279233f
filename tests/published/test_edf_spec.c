/*
 * test_edf_spec.c - the EDF+ specification's own example bytes (Kemp & Olivan 2003, sections 2.2.2
 * and 2.2.4; full text at edfplus.info), and its arithmetic.
 */
#include <criterion/criterion.h>

#include <stdio.h>
#include <string.h>

#include "recording/edf_annotations.h"
#include "base/ns.h"
#include "recording/recording.h"

struct want {
    double onset_s, span_s;
    const char *text;
};

static void expect_texts(const char *bytes, size_t size, const struct want *want, size_t count)
{
    struct tal_reader reader;
    struct tal_text text;
    size_t got = 0;
    tal_begin(&reader, (const uint8_t *)bytes, size);
    while (tal_next(&reader, &text)) {
        cr_assert_lt(got, count);
        cr_expect_eq(text.onset_ns, ns_from_s(want[got].onset_s));
        cr_expect_eq(text.span_ns, ns_from_s(want[got].span_s));
        cr_expect_eq(text.length, strlen(want[got].text));
        cr_expect_eq(memcmp(text.text, want[got].text, text.length), 0);
        got++;
    }
    cr_expect_eq(got, count);
    cr_expect_eq(reader.malformed, 0);
}

#define EXPECT(bytes, ...)                                                    \
    do {                                                                      \
        static const struct want want[] = {__VA_ARGS__};                      \
        expect_texts(bytes, sizeof(bytes), want, sizeof want / sizeof *want); \
    } while (0)

/* "+180<20>Lights off<20>Close door<20><0>": 28 bytes, as the specification counts them; sizeof a
 * string adds its final zero. */
Test(edf_spec, two_texts_at_one_onset)
{
    static const char one[] = "+180\024Lights off\024Close door\024";
    cr_expect_eq(sizeof one, 28);
    EXPECT("+180\024Lights off\024Close door\024", {180, 0, "Lights off"}, {180, 0, "Close door"});
    EXPECT("+180\024Lights off\024\0+180\024Close door\024", {180, 0, "Lights off"},
           {180, 0, "Close door"});
}

Test(edf_spec, onset_with_duration)
{
    static const char apnea[] = "+1800.2\02525.5\024Apnea\024";
    cr_expect_eq(sizeof apnea, 20);
    EXPECT("+1800.2\02525.5\024Apnea\024", {1800.2, 25.5, "Apnea"});
}

/* The first list of a record keeps its time; its first text is empty. */
Test(edf_spec, time_keeping)
{
    int64_t onset;
    cr_assert(tal_record_onset((const uint8_t *)"+0\024\024", 5, &onset));
    cr_expect_eq(onset, 0);
    cr_assert(tal_record_onset((const uint8_t *)"+0.25\024\024", 8, &onset));
    cr_expect_eq(onset, 250 * NS_PER_MS);
    cr_assert(tal_record_onset((const uint8_t *)"+567\024\024", 7, &onset));
    cr_expect_eq(onset, 567 * NS_PER_S);
    EXPECT("+567\024\024\0+567.5\024R\xC3\xA9"
           "action\024",
           {567, 0, ""},
           {567.5, 0,
            "R\xC3\xA9"
            "action"});
}

/* Puts `text` at `at` of a header of blanks. */
static void put(uint8_t *header, size_t at, const char *text)
{
    memcpy(header + at, text, strlen(text));
}

/* A file of one signal and one record of `count` samples. */
static float first_value(bool bdf, const char *limits[4], const uint8_t *samples, size_t size,
                         int sample)
{
    uint8_t file[512 + 64];
    char number[24];
    memset(file, ' ', 512);
    if (bdf)
        memcpy(file,
               "\xFF"
               "BIOSEMI",
               8);
    else
        put(file, 0, "0");
    put(file, 168, "20.05.3108.55.00512");
    put(file, 236, "1");
    put(file, 244, "1");
    put(file, 252, "1");
    put(file, 256, "x");
    for (size_t i = 0; i < 4; i++)
        put(file, 256 + 104 + 8 * i, limits[i]);
    (void)snprintf(number, sizeof number, "%zu", size / (bdf ? 3 : 2));
    put(file, 256 + 216, number);
    memcpy(file + 512, samples, size);
    struct memory_file files[] = {{"x", file, 512 + size}};
    struct memory_files space;
    memory_files_init(&space, files, 1);
    struct reader_options options = {.files = &space.space};
    struct recording *recording = NULL;
    struct err err = {0};
    float value;
    cr_assert_eq(recording_open("x", &options, &recording, &err), 0, "%s", err.text);
    cr_assert_eq(recording_read(recording, 0, sample, 1, &value, &err), 0);
    recording_close(recording);
    return value;
}

/* -3276.8..3276.7 over the 16-bit range is 0.1 a step; the BDF description's example range gives
 * 31.25 nV a step (0.0312499423 uV, computed). */
Test(edf_spec, scaling_and_24_bits)
{
    const char *tenth[] = {"-3276.8", "3276.7", "-32768", "32767"};
    static const uint8_t hundred[] = {100, 0, 0xFF, 0xFF};
    cr_expect_float_eq((double)first_value(false, tenth, hundred, 4, 0), 10.0, 1e-6);
    cr_expect_float_eq((double)first_value(false, tenth, hundred, 4, 1), -0.1, 1e-6);
    const char *nano[] = {"-262144", "262143", "-8388608", "8388607"};
    static const uint8_t words[] = {0x00, 0x00, 0x80, 0xFF, 0xFF, 0x7F,
                                    0x00, 0x00, 0x00, 0x40, 0xE2, 0x01};
    cr_expect_eq(first_value(true, nano, words, 12, 0), -262144.0f);
    cr_expect_eq(first_value(true, nano, words, 12, 1), 262143.0f);
    cr_expect_float_eq(
        (double)(first_value(true, nano, words, 12, 3) - first_value(true, nano, words, 12, 2)),
        123456 * 0.0312499423, 1e-3);
}
