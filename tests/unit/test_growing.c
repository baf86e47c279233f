/*
 * test_growing.c - samples that are still coming in against a plain array of them: any range,
 * before and after they have left memory, with gaps, missing samples and a clock that is fitted
 * anew.
 */
#include <criterion/criterion.h>

#include <math.h>
#include <pthread.h>
#include <stdatomic.h>
#include <stdlib.h>
#include <string.h>

#include "trace/growing.h"
#include "trace/overview.h"

enum { CHANNELS = 2, MOST = 400000, KEEP = 1000 };

/* What was appended; the past is read from here as it would be from a file. */
struct plain {
    float *samples[CHANNELS];
    int64_t count[CHANNELS];
    _Atomic int64_t past_reads, longest_past;
    bool broken;
};

static uint64_t seed = 20310520;

static uint64_t random_below(uint64_t n)
{
    seed = seed * 6364136223846793005u + 1442695040888963407u;
    return (seed >> 33) % n;
}

static float sample_at(size_t channel, int64_t k)
{
    uint64_t mixed = ((uint64_t)k + channel * 977) * 0x9E3779B97F4A7C15u;
    bool hole = (k / 3000) % 11 == 7 || mixed >> 58 == 5;
    return hole ? NAN : (float)(mixed >> 44) / 1000 - 500 + (float)(k % 5000) / 10;
}

static int read_past(void *context, size_t channel, int64_t first, int64_t count, float *out,
                     struct err *err)
{
    struct plain *plain = context;
    if (plain->broken)
        return err_set(err, ERR_IO, "a.bdf: cannot be read");
    atomic_fetch_add(&plain->past_reads, 1);
    if (count > atomic_load(&plain->longest_past))
        atomic_store(&plain->longest_past, count);
    memcpy(out, plain->samples[channel] + first, (size_t)count * sizeof *out);
    return ERR_OK;
}

static struct plain *plain_new(void)
{
    struct plain *plain = calloc(1, sizeof *plain);
    for (size_t i = 0; i < CHANNELS; i++) {
        plain->samples[i] = malloc(MOST * sizeof(float));
        for (int64_t k = 0; k < MOST; k++)
            plain->samples[i][k] = sample_at(i, k);
    }
    return plain;
}

static void plain_free(struct plain *plain)
{
    for (size_t i = 0; i < CHANNELS; i++)
        free(plain->samples[i]);
    free(plain);
}

static struct growing *make(struct plain *plain)
{
    static const struct growing_channel specs[CHANNELS] = {
        {"ECG II", "mV", ROLE_ECG, 1000, KEEP}, {"EDA", "uS", ROLE_EDA, 1000.0 / 3, 2 * KEEP}};
    struct growing_past past = {read_past, plain};
    struct growing *growing = NULL;
    struct err err = {0};
    cr_assert_eq(growing_new(specs, CHANNELS, &past, &growing, &err), 0, "%s", err.text);
    return growing;
}

static void append(struct growing *growing, struct plain *plain, size_t channel, int64_t count)
{
    struct err err = {0};
    if (count > MOST - plain->count[channel])
        count = MOST - plain->count[channel];
    cr_assert_eq(growing_append(growing, channel, plain->samples[channel] + plain->count[channel],
                                count, &err),
                 0, "%s", err.text);
    plain->count[channel] += count;
}

static bool same(float a, float b)
{
    return a == b || (isnan(a) && isnan(b));
}

static void expect_range(struct growing *growing, const struct plain *plain, size_t channel,
                         int64_t first, int64_t count)
{
    static float got[MOST];
    struct trace *trace = growing_trace(growing, channel);
    const float *want = plain->samples[channel] + first;
    struct err err = {0};
    float low, high, least = NAN, greatest = NAN;
    for (int64_t i = 0; i < count; i++) {
        least = fminf(least, want[i]);
        greatest = fmaxf(greatest, want[i]);
    }
    cr_assert_eq(trace_minmax(trace, first, count, &low, &high, &err), 0, "%s", err.text);
    cr_assert(same(low, least) && same(high, greatest),
              "channel %zu, %lld samples from %lld: %g..%g, not %g..%g", channel, (long long)count,
              (long long)first, (double)low, (double)high, (double)least, (double)greatest);
    cr_assert_eq(trace_read(trace, first, count, got, &err), 0, "%s", err.text);
    for (int64_t i = 0; i < count; i++)
        cr_assert(same(got[i], want[i]), "channel %zu, sample %lld", channel,
                  (long long)(first + i));
}

/* Ranges at random, some that begin or end on a block or with the channel. */
static void expect_ranges(struct growing *growing, const struct plain *plain, int rounds)
{
    for (int i = 0; i < rounds; i++) {
        size_t channel = random_below(CHANNELS);
        int64_t samples = growing_trace(growing, channel)->samples;
        if (samples == 0)
            continue;
        int64_t longest = (int64_t)1 << random_below(19);
        longest = longest < samples ? longest : samples;
        int64_t count = 1 + (int64_t)random_below((uint64_t)longest);
        int64_t first = (int64_t)random_below((uint64_t)(samples - count + 1));
        if (i % 3 == 0)
            first -= first % OVERVIEW_BLOCK;
        if (i % 4 == 0)
            count = samples - first;
        expect_range(growing, plain, channel, first, count);
    }
}

static void refresh(struct growing *growing, int64_t offset_ns)
{
    struct clock_map map = {.offset_ns = offset_ns};
    struct err err = {0};
    cr_assert_eq(growing_refresh(growing, &map, &err), 0, "%s", err.text);
}

Test(growing, any_range_equals_the_plain_samples_before_and_after_the_ring_turns)
{
    struct plain *plain = plain_new();
    struct growing *growing = make(plain);
    struct err err = {0};
    cr_expect_eq(growing_append(growing, 0, plain->samples[0], 1, &err), ERR_USAGE);
    cr_assert_eq(growing_run(growing, 0, &err), 0);
    refresh(growing, 0);
    cr_expect_eq(growing_trace(growing, 0)->samples, 0);
    while (plain->count[0] < MOST || plain->count[1] < MOST) {
        append(growing, plain, 0, (int64_t)random_below((uint64_t)1 << random_below(16)));
        append(growing, plain, 1, (int64_t)random_below((uint64_t)1 << random_below(16)));
        refresh(growing, 0);
        for (size_t i = 0; i < CHANNELS; i++)
            cr_assert_eq(growing_trace(growing, i)->samples, plain->count[i]);
        expect_ranges(growing, plain, 3);
    }
    cr_expect_gt(plain->past_reads, 0);
    expect_ranges(growing, plain, 100);
    growing_free(growing);
    plain_free(plain);
}

Test(growing, traces_stand_still_between_refreshes)
{
    struct plain *plain = plain_new();
    struct growing *growing = make(plain);
    struct err err = {0};
    float sample;
    cr_assert_eq(growing_run(growing, 0, &err), 0);
    append(growing, plain, 0, 700);
    refresh(growing, 0);
    struct trace *trace = growing_trace(growing, 0);
    append(growing, plain, 0, 5000);
    cr_expect_eq(trace->samples, 700);
    cr_expect_eq(growing_samples(growing, 0), 5700);
    cr_expect_neq(trace_read(trace, 700, 1, &sample, &err), 0);
    expect_range(growing, plain, 0, 0, 700);
    growing_free(growing);
    plain_free(plain);
}

Test(growing, extremes_of_any_length_read_two_blocks_at_most)
{
    struct plain *plain = plain_new();
    struct growing *growing = make(plain);
    struct err err = {0};
    float low, high;
    cr_assert_eq(growing_run(growing, 0, &err), 0);
    append(growing, plain, 0, MOST);
    refresh(growing, 0);
    for (int64_t count = 1; count < MOST - 5; count = count * 2 + 1) {
        plain->past_reads = plain->longest_past = 0;
        cr_assert_eq(trace_minmax(growing_trace(growing, 0), 5, count, &low, &high, &err), 0);
        cr_expect_leq(plain->past_reads, 2);
        cr_expect_leq(plain->longest_past, 2 * OVERVIEW_BLOCK);
    }
    plain->broken = true;
    cr_expect_eq(trace_minmax(growing_trace(growing, 0), 5, 900, &low, &high, &err), ERR_IO);
    cr_expect_eq(trace_minmax(growing_trace(growing, 0), MOST - 900, 900, &low, &high, &err), 0);
    growing_free(growing);
    plain_free(plain);
}

/* Two stretches; the clock's drift is refitted and moves every sample, not their values. */
Test(growing, runs_and_refits_lay_samples_on_case_time)
{
    struct plain *plain = plain_new();
    struct growing *growing = make(plain);
    struct err err = {0};
    cr_assert_eq(growing_run(growing, 5 * NS_PER_MS, &err), 0);
    append(growing, plain, 0, 30000);
    append(growing, plain, 1, 10000);
    cr_assert_eq(growing_run(growing, 100 * NS_PER_S, &err), 0);
    refresh(growing, NS_PER_S);
    const struct trace *fast = growing_trace(growing, 0), *slow = growing_trace(growing, 1);
    cr_assert_eq(fast->run_count, 1, "an empty run is none");
    cr_expect_eq(fast->runs[0].start_ns, 1005 * NS_PER_MS);
    cr_expect_eq(slow->runs[0].span_ns, 30 * NS_PER_S, "333.333 Hz");
    append(growing, plain, 0, 1000);
    append(growing, plain, 1, 333);
    struct clock_piece pieces[] = {{0, 1000000, 7 * NS_PER_S, 1000100, 0},
                                   {100 * NS_PER_S, 1000000, 200 * NS_PER_S, 999900, 0}};
    struct clock_map map = {.pieces = pieces, .piece_count = 2};
    for (int i = 0; i < 2; i++) {
        cr_assert_eq(growing_refresh(growing, &map, &err), 0);
        cr_assert_eq(fast->run_count, 2);
        cr_expect_eq(fast->runs[0].span_ns, 30 * NS_PER_S + 3 * NS_PER_MS);
        cr_expect_eq(fast->runs[1].start_ns, pieces[1].case_ns);
        cr_expect_eq(fast->runs[1].first, 30000);
        cr_expect_eq(trace_time_ns(slow, 10000), pieces[1].case_ns);
        cr_expect_eq(slow->runs[1].count, 333);
        pieces[1].case_ns += 3 * NS_PER_MS;
    }
    growing_free(growing);
    plain_free(plain);
}

Test(growing, what_cannot_be_kept_is_refused)
{
    struct growing_past past = {read_past, NULL};
    struct growing_channel spec = {"x", "", ROLE_NONE, 100, 2 * OVERVIEW_BLOCK - 1};
    struct growing *growing = NULL;
    struct err err = {0};
    cr_expect_eq(growing_new(&spec, 1, &past, &growing, &err), ERR_USAGE);
    spec.keep++;
    spec.rate_hz = 0;
    cr_expect_eq(growing_new(&spec, 1, &past, &growing, &err), ERR_USAGE);
    cr_expect_null(growing);
    growing_free(growing);
}

/* ---- two threads ---- */

struct writing {
    struct growing *growing;
    struct plain *plain;
    atomic_bool done;
    int failed;
};

static void *write_all(void *context)
{
    struct writing *job = context;
    uint32_t state = 9;
    int64_t at[CHANNELS] = {0};
    while (at[0] < MOST && !job->failed) {
        state = state * 1664525u + 1013904223u;
        int64_t step = 1 + (int64_t)(state >> 8) % 700;
        step = step < MOST - at[0] ? step : MOST - at[0];
        if (state >> 25 == 0)
            job->failed = growing_run(job->growing, at[0] * NS_PER_MS * 4, NULL);
        for (size_t i = 0; i < CHANNELS && !job->failed; i++) {
            job->failed =
                growing_append(job->growing, i, job->plain->samples[i] + at[i], step, NULL);
            at[i] += step;
        }
    }
    atomic_store(&job->done, true);
    return NULL;
}

Test(growing, a_reader_beside_the_writer_sees_whole_truth)
{
    struct plain *plain = plain_new();
    struct writing job = {make(plain), plain, false, 0};
    pthread_t thread;
    struct err err = {0};
    int64_t last = 0;
    cr_assert_eq(growing_run(job.growing, 0, &err), 0);
    cr_assert_eq(pthread_create(&thread, NULL, write_all, &job), 0);
    for (bool done = false; !done;) {
        done = atomic_load(&job.done);
        refresh(job.growing, 0);
        const struct trace *trace = growing_trace(job.growing, 0);
        cr_assert_geq(trace->samples, last);
        last = trace->samples;
        int64_t counted = 0;
        for (size_t i = 0; i < trace->run_count; i++)
            counted += trace->runs[i].count;
        cr_assert_eq(counted, last, "runs hold every sample");
        expect_ranges(job.growing, plain, 4);
    }
    (void)pthread_join(thread, NULL);
    cr_assert_eq(job.failed, 0);
    cr_expect_eq(last, MOST);
    growing_free(job.growing);
    plain_free(plain);
}
