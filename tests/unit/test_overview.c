/*
 * test_overview.c - extremes of any stretch equal a plain scan, while building and after, from
 * memory and from the file beside the case.
 */
#include <criterion/criterion.h>

#include <stdio.h>
#include <stdlib.h>
#include <unistd.h>

#include "memory_recording.h"
#include "trace/overview.h"

static const char digest[] = "00112233445566778899aabbccddeeff00112233445566778899aabbccddeeff";
static const char other[] = "ff112233445566778899aabbccddeeff00112233445566778899aabbccddeeff";

static uint64_t seed = 20310520;

static uint64_t random_below(uint64_t n)
{
    seed = seed * 6364136223846793005u + 1442695040888963407u;
    return (seed >> 33) % n;
}

/* A wandering signal with stretches of every length missing, some longer than many blocks. */
static float *make_signal(int64_t count)
{
    float *samples = malloc((size_t)count * sizeof *samples + 1);
    float at = 0;
    for (int64_t i = 0; i < count; i++) {
        at += (float)random_below(2001) / 1000.0f - 1.0f;
        samples[i] = random_below(5000) == 0 ? at + 100 : at;
    }
    for (int64_t hole = 0; hole < count / 20000; hole++) {
        int64_t from = (int64_t)random_below((uint64_t)count);
        int64_t length = (int64_t)1 << random_below(15);
        for (int64_t i = from; i < count && i < from + length; i++)
            samples[i] = NAN;
    }
    return samples;
}

static bool same(float a, float b)
{
    return a == b || (isnan(a) && isnan(b));
}

static void expect_range(const struct overview *overview, const struct memory_recording *of,
                         size_t channel, int64_t first, int64_t count)
{
    float low = 0, high = 0, want_low, want_high;
    scan(of->samples[channel] + first, count, &want_low, &want_high);
    cr_expect_eq(overview_minmax(overview, channel, first, count, &low, &high), OVERVIEW_EXACT);
    cr_expect(same(low, want_low) && same(high, want_high),
              "channel %zu, %lld samples from %lld: %g..%g, a scan says %g..%g", channel,
              (long long)count, (long long)first, (double)low, (double)high, (double)want_low,
              (double)want_high);
}

/* Ranges at random, log-uniform in length, and those that begin or end on a block, on its
 * neighbours or with the channel. */
static void expect_ranges(const struct overview *overview, const struct memory_recording *of,
                          size_t channel, int rounds)
{
    int64_t samples = of->channels[channel].samples;
    for (int i = 0; i < rounds && samples > 0; i++) {
        int64_t longest = (int64_t)1 << random_below(22);
        longest = longest < samples ? longest : samples;
        int64_t count = 1 + (int64_t)random_below((uint64_t)longest);
        int64_t first = (int64_t)random_below((uint64_t)(samples - count + 1));
        if (i % 3 == 0)
            first -= first % OVERVIEW_BLOCK;
        if (i % 5 == 0)
            count = samples - first;
        if (i % 7 == 0 && first + OVERVIEW_BLOCK + 1 <= samples)
            count = OVERVIEW_BLOCK + 1;
        expect_range(overview, of, channel, first, count);
    }
    if (samples > 0)
        expect_range(overview, of, channel, 0, samples);
}

static struct overview *open_overview(const struct memory_recording *of, const char *which,
                                      const char *path, int threads)
{
    struct overview *overview = NULL;
    struct err err = {0};
    cr_assert_eq(overview_open(&of->base, which, path, threads, &overview, &err), 0, "%s",
                 err.text);
    return overview;
}

static void expect_finished(const struct overview *overview, int code)
{
    int64_t done = -1, total = -2;
    struct err why = {0};
    overview_progress(overview, &done, &total, &why);
    cr_expect_eq(done, total);
    cr_expect_eq(why.code, code, "%s", why.text);
}

Test(overview, any_range_equals_a_plain_scan)
{
    static const int64_t sizes[] = {
        0,     1,     2,     255,   256,   257,   511,    512,    4095,   4096,           4097,
        65535, 65536, 65537, 65792, 69632, 70001, 131072, 196607, 200003, 65536 * 17 + 1, 1300000};
    for (size_t i = 0; i < sizeof sizes / sizeof *sizes; i += 2) {
        float *signal[2] = {make_signal(sizes[i]), make_signal(sizes[i + 1])};
        struct memory_recording of;
        memory_recording_init(&of, 2, (const float *const *)signal, &sizes[i]);
        struct overview *overview = open_overview(&of, digest, NULL, 1 + (int)(i / 2) % 3);
        overview_wait(overview);
        expect_finished(overview, 0);
        for (size_t channel = 0; channel < 2; channel++)
            expect_ranges(overview, &of, channel, 200);
        overview_close(overview);
        free(signal[0]);
        free(signal[1]);
    }
}

Test(overview, a_range_costs_the_same_however_long)
{
    const int64_t count = 2000001;
    float *signal = make_signal(count);
    struct memory_recording of;
    memory_recording_init(&of, 1, (const float *const *)&signal, &count);
    struct overview *overview = open_overview(&of, digest, NULL, 2);
    overview_wait(overview);
    of.longest = of.calls = 0;
    for (int64_t length = 3; length < count - 7; length = length * 3 / 2) {
        int64_t before = of.calls;
        expect_range(overview, &of, 0, 7, length);
        cr_expect_leq(of.calls - before, 2);
    }
    cr_expect_leq(of.longest, 2 * OVERVIEW_BLOCK, "only the ends are read from the recording");
    overview_close(overview);
    free(signal);
}

/* What is answered while the builders run is right; what is not there is said to be missing. */
Test(overview, answers_while_it_is_built_are_exact_or_pending)
{
    const int64_t counts[] = {300000, 100000};
    float *signal[2] = {make_signal(counts[0]), make_signal(counts[1])};
    struct memory_recording of;
    memory_recording_init(&of, 2, (const float *const *)signal, counts);
    of.slow_us = 20;
    struct overview *overview = open_overview(&of, digest, NULL, 2);
    int64_t done = 0, total = 0, pending = 0, exact = 0;
    struct err why = {0};
    do {
        size_t channel = random_below(2);
        int64_t first = (int64_t)random_below((uint64_t)counts[channel] - 1);
        int64_t count = 1 + (int64_t)random_below((uint64_t)(counts[channel] - first));
        float low = 0, high = 0, want_low, want_high;
        if (overview_minmax(overview, channel, first, count, &low, &high) == OVERVIEW_PENDING) {
            pending++;
        } else {
            exact++;
            scan(signal[channel] + first, count, &want_low, &want_high);
            cr_expect(same(low, want_low) && same(high, want_high));
        }
        int64_t before = done;
        overview_progress(overview, &done, &total, &why);
        cr_expect(done >= before && done <= total);
        cr_expect_eq(total, counts[0] + counts[1]);
    } while (done < total);
    cr_expect_gt(pending, 0);
    cr_expect_gt(exact, 0);
    overview_close(overview);
    free(signal[0]);
    free(signal[1]);
}

Test(overview, is_loaded_from_its_file_and_not_built_again)
{
    char folder[] = "/tmp/incisura-overview-XXXXXX", path[64];
    cr_assert_not_null(mkdtemp(folder));
    (void)snprintf(path, sizeof path, "%s/a.overview", folder);
    const int64_t counts[] = {150001, 0, 700};
    float *signal[3] = {make_signal(counts[0]), make_signal(1), make_signal(counts[2])};
    struct memory_recording of;
    memory_recording_init(&of, 3, (const float *const *)signal, counts);
    for (int round = 0; round < 3; round++) {
        /* Third time: the file is of another recording of the same size. */
        of.calls = 0;
        struct overview *overview = open_overview(&of, round == 2 ? other : digest, path, 2);
        overview_wait(overview);
        expect_finished(overview, 0);
        cr_expect(round == 1 ? of.calls == 0 : of.calls > 0, "round %d", round);
        expect_ranges(overview, &of, 0, 100);
        expect_ranges(overview, &of, 2, 100);
        overview_close(overview);
        cr_expect_eq(access(path, R_OK), 0);
    }
    (void)unlink(path);
    cr_expect_eq(rmdir(folder), 0, "nothing else is left in the folder");
    for (int i = 0; i < 3; i++)
        free(signal[i]);
}
