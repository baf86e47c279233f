/*
 * test_physiology_beats.c - R peaks on an ECG whose truth is known, and what must not change them.
 *
 * The ECG is the sum of five Gaussian waves a beat (P, Q, R, S, T) with the angles, heights and
 * widths of McSharry, Clifford, Tarassenko & Smith 2003, IEEE Trans Biomed Eng 50:289, table I:
 * the heights are a * b^2, which is what their equation of motion settles to, scaled to R = 1 mV.
 */
#include <criterion/criterion.h>

#include <math.h>
#include <stdlib.h>

#include "base/ns.h"
#include "physiology/derivation.h"
#include "physiology/ecg_beats.h"

enum { MOST_BEATS = 2000 };

struct ecg {
    double rate_hz, span_s;
    double beats_s[MOST_BEATS]; /* the truth */
    double intervals_s[MOST_BEATS];
    size_t beat_count;
    int64_t count;
};

static double noise_unit(uint32_t *seed) /* sum of 12 uniform ones: variance 1 */
{
    double sum = -6;
    for (int i = 0; i < 12; i++) {
        *seed = *seed * 1664525u + 1013904223u;
        sum += (double)(*seed >> 8) / 16777216.0;
    }
    return sum;
}

/* Beats with the slow and the breathing variation of a resting heart around `interval_s`. */
static struct ecg *ecg_new(double rate_hz, double span_s, double interval_s)
{
    struct ecg *ecg = calloc(1, sizeof *ecg);
    cr_assert_not_null(ecg);
    ecg->rate_hz = rate_hz;
    ecg->span_s = span_s;
    ecg->count = (int64_t)(rate_hz * span_s);
    double at = 0.31234;
    while (at < span_s - 0.5 && ecg->beat_count < MOST_BEATS) {
        double interval =
            interval_s * (1 + 0.05 * sin(2 * M_PI * 0.1 * at) + 0.03 * sin(2 * M_PI * 0.25 * at));
        ecg->beats_s[ecg->beat_count] = at;
        ecg->intervals_s[ecg->beat_count++] = interval;
        at += interval;
    }
    return ecg;
}

static void add_wave(const struct ecg *ecg, float *out, double at_s, double width_s, double height)
{
    int64_t first = (int64_t)((at_s - 5 * width_s) * ecg->rate_hz);
    int64_t last = (int64_t)((at_s + 5 * width_s) * ecg->rate_hz) + 1;
    for (int64_t i = first < 0 ? 0 : first; i <= last && i < ecg->count; i++) {
        double d = ((double)i / ecg->rate_hz - at_s) / width_s;
        out[i] += (float)(height * exp(-d * d / 2));
    }
}

/* A lead: `height` mV of R (negative = inverted), wander of the baseline and noise in mV. */
static float *lead_new(const struct ecg *ecg, double height, double wander, double noise)
{
    static const double angle[] = {-M_PI / 3, -M_PI / 12, 0, M_PI / 12, M_PI / 2};
    static const double a[] = {1.2, -5, 30, -7.5, 0.75}, b[] = {0.25, 0.1, 0.1, 0.1, 0.4};
    float *out = calloc((size_t)ecg->count, sizeof *out);
    cr_assert_not_null(out);
    for (size_t k = 0; k < ecg->beat_count; k++) {
        double turn = ecg->intervals_s[k] / (2 * M_PI);
        for (int w = 0; w < 5; w++)
            add_wave(ecg, out, ecg->beats_s[k] + angle[w] * turn, b[w] * turn,
                     height * a[w] * b[w] * b[w] / 0.3);
    }
    uint32_t seed = 7;
    for (int64_t i = 0; i < ecg->count; i++)
        out[i] += (float)(wander * sin(2 * M_PI * 0.2 * (double)i / ecg->rate_hz) +
                          noise * noise_unit(&seed));
    return out;
}

static struct trace *trace_of(const struct ecg *ecg, float *samples, int64_t start_ns)
{
    struct run run = {start_ns, llround((double)ecg->count * 1e9 / ecg->rate_hz), 0, ecg->count};
    struct trace *trace = NULL;
    struct err err = {0};
    cr_assert_eq(memory_trace_new("ECG", "mV", &run, 1, samples, 0, &trace, &err), 0);
    return trace;
}

static struct train beats_of(const struct trace *const *leads, size_t count, int64_t block)
{
    struct train train = {0};
    struct err err = {0};
    cr_assert_eq(ecg_beats(leads, count, block, NULL, &train, &err), 0, "%s", err.text);
    return train;
}

/* Beats of one lead, which is used up. */
static struct train beats_of_lead(const struct ecg *ecg, float *samples)
{
    struct trace *trace = trace_of(ecg, samples, 0);
    struct train train = beats_of((const struct trace *const *)&trace, 1, 4096);
    trace_free(trace);
    return train;
}

struct score {
    size_t hit, missed, extra;
    double worst_s, jitter_s; /* of the hits, their mean offset taken off the jitter */
};

/* Pairs each true beat of [from_s, to_s) with the nearest found one within 150 ms (EC57). */
static struct score score(const struct ecg *ecg, const struct train *train, double from_s,
                          double to_s)
{
    struct score s = {0};
    double sum = 0, squares = 0;
    size_t found = 0;
    for (size_t i = 0; i < train->count; i++)
        found += s_from_ns(train->events[i].time_ns) >= from_s &&
                 s_from_ns(train->events[i].time_ns) < to_s;
    for (size_t k = 0; k < ecg->beat_count; k++) {
        if (ecg->beats_s[k] < from_s || ecg->beats_s[k] >= to_s)
            continue;
        double nearest = 1;
        for (size_t i = 0; i < train->count; i++) {
            double off = s_from_ns(train->events[i].time_ns) - ecg->beats_s[k];
            nearest = fabs(off) < fabs(nearest) ? off : nearest;
        }
        if (fabs(nearest) > 0.15) {
            s.missed++;
            continue;
        }
        s.hit++;
        sum += nearest;
        squares += nearest * nearest;
        s.worst_s = fmax(s.worst_s, fabs(nearest));
    }
    double mean = sum / (double)s.hit;
    s.jitter_s = sqrt(fmax(0, squares / (double)s.hit - mean * mean));
    s.extra = found > s.hit ? found - s.hit : 0;
    return s;
}

Test(beats, every_beat_is_found_at_any_rate)
{
    static const struct {
        double rate_hz, interval_s;
    } rows[] = {{100, 0.8}, {125, 1.0}, {250, 0.8},   {333.333, 0.6}, {360, 1.3},
                {500, 0.4}, {512, 2.0}, {1000, 0.85}, {2000, 0.75}};
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        struct ecg *ecg = ecg_new(rows[i].rate_hz, 60, rows[i].interval_s);
        struct train train = beats_of_lead(ecg, lead_new(ecg, 1, 0.3, 0.02));
        struct score s = score(ecg, &train, 0, 60);
        cr_expect(s.missed == 0 && s.extra == 0, "%g Hz, %g s: missed %zu, extra %zu of %zu",
                  rows[i].rate_hz, rows[i].interval_s, s.missed, s.extra, ecg->beat_count);
        cr_expect_lt(s.worst_s, rows[i].rate_hz < 200 ? 0.006 : 0.004, "%g Hz: off by %g s",
                     rows[i].rate_hz, s.worst_s);
        train_free(&train);
        free(ecg);
    }
}

/* Between the samples: at 250 Hz a sample is 4 ms, the jitter stays below 1 ms. */
Test(beats, r_peaks_lie_between_the_samples)
{
    struct ecg *ecg = ecg_new(250, 120, 0.83);
    struct train train = beats_of_lead(ecg, lead_new(ecg, 1, 0, 0));
    struct score s = score(ecg, &train, 0, 120);
    cr_expect_eq(s.missed + s.extra, 0);
    cr_expect_lt(s.jitter_s, 0.0005, "jitter %g s", s.jitter_s);
    cr_expect_lt(s.worst_s, 0.001, "off by %g s", s.worst_s);
    for (size_t i = 0; i < train.count; i++)
        cr_expect(train.events[i].value > 0.75f && train.events[i].value < 1.0f,
                  "R of 1 mV stands %g mV above the median around it",
                  (double)train.events[i].value);
    train_free(&train);
    free(ecg);
}

Test(beats, block_size_changes_nothing)
{
    struct ecg *ecg = ecg_new(360, 40, 0.7);
    float *samples = lead_new(ecg, 1, 0.5, 0.1);
    for (int64_t i = 5000; i < 5400; i++)
        samples[i] = NAN;
    struct trace *trace = trace_of(ecg, samples, 0);
    const struct trace *const *leads = (const struct trace *const *)&trace;
    struct train whole = beats_of(leads, 1, 4096);
    static const int64_t blocks[] = {1, 7, 100, 65536};
    for (size_t b = 0; b < 4; b++) {
        struct train train = beats_of(leads, 1, blocks[b]);
        cr_assert_eq(train.count, whole.count);
        for (size_t i = 0; i < train.count; i++) {
            cr_expect_eq(train.events[i].time_ns, whole.events[i].time_ns);
            cr_expect_eq(train.events[i].value, whole.events[i].value);
            cr_expect_eq(train.events[i].flags, whole.events[i].flags);
        }
        train_free(&train);
    }
    train_free(&whole);
    trace_free(trace);
    free(ecg);
}

static uint32_t draw(uint32_t *seed, uint32_t below)
{
    *seed = *seed * 1664525u + 1013904223u;
    return (*seed >> 8) % below;
}

/* A lead in up to five runs of any length, with pauses from none to seconds and samples missing
 * in ones and in stretches, from the first one on. */
static struct trace *torn_lead(uint32_t *seed)
{
    static const double rates[] = {100, 128, 333.3, 360, 500, 1000};
    double rate_hz = rates[draw(seed, 6)];
    struct run runs[5];
    size_t run_count = 1 + draw(seed, 5);
    int64_t at_ns = (int64_t)draw(seed, 3000) * NS_PER_MS, first = 0;
    for (size_t r = 0; r < run_count; r++) {
        int64_t count = 1 + draw(seed, 5000);
        runs[r] = (struct run){at_ns, llround((double)count * 1e9 / rate_hz), first, count};
        at_ns = run_end_ns(&runs[r]) + NS_PER_MS * draw(seed, draw(seed, 3) ? 30 : 4000);
        first += count;
    }
    float *samples = malloc((size_t)first * sizeof *samples);
    cr_assert_not_null(samples);
    int64_t missing = draw(seed, 20);
    for (int64_t i = 0; i < first; i++) {
        double phase = fmod((double)i / rate_hz, 0.8) - 0.4;
        if (draw(seed, 400) == 0)
            missing = draw(seed, 40);
        samples[i] = missing-- > 0 ? NAN : (float)exp(-phase * phase / 4e-4);
    }
    struct trace *trace = NULL;
    struct err err = {0};
    cr_assert_eq(memory_trace_new("ECG", "mV", runs, run_count, samples, 0, &trace, &err), 0);
    return trace;
}

Test(beats, block_size_changes_nothing_in_torn_recordings)
{
    uint32_t seed = 5;
    size_t beats = 0;
    for (int round = 0; round < 60; round++) {
        struct trace *traces[] = {torn_lead(&seed), torn_lead(&seed)};
        const struct trace *const *leads = (const struct trace *const *)traces;
        struct train a = beats_of(leads, 2, 4096), b = beats_of(leads, 2, 1 + draw(&seed, 300));
        cr_assert_eq(a.count, b.count, "round %d", round);
        for (size_t i = 0; i < a.count; i++) {
            cr_assert_eq(a.events[i].time_ns, b.events[i].time_ns, "round %d", round);
            cr_assert_eq(a.events[i].flags, b.events[i].flags);
        }
        beats += a.count;
        train_free(&a);
        train_free(&b);
        trace_free(traces[0]);
        trace_free(traces[1]);
    }
    cr_expect_gt(beats, 500, "only %zu beats", beats);
}

Test(beats, a_shift_in_time_shifts_the_beats)
{
    struct ecg *ecg = ecg_new(250, 30, 0.8);
    const int64_t shift_ns = -3 * NS_PER_HOUR + 1234567;
    struct trace *here = trace_of(ecg, lead_new(ecg, 1, 0.2, 0.05), 0);
    struct trace *there = trace_of(ecg, lead_new(ecg, 1, 0.2, 0.05), shift_ns);
    struct train a = beats_of((const struct trace *const *)&here, 1, 4096);
    struct train b = beats_of((const struct trace *const *)&there, 1, 4096);
    cr_assert_eq(a.count, b.count);
    for (size_t i = 0; i < a.count; i++)
        cr_expect_eq(a.events[i].time_ns + shift_ns, b.events[i].time_ns);
    train_free(&a);
    train_free(&b);
    trace_free(here);
    trace_free(there);
    free(ecg);
}

/* Volts, microvolts, upside down, on top of an offset: the same beats. */
Test(beats, scale_sign_and_offset_change_nothing)
{
    struct ecg *ecg = ecg_new(500, 60, 0.9);
    struct train usual = beats_of_lead(ecg, lead_new(ecg, 1, 0.2, 0.03));
    static const struct {
        float gain, offset;
    } rows[] = {{0.001f, 0}, {1024, 0}, {-1, 0}, {-300, 5000}, {1, -9}};
    for (size_t r = 0; r < sizeof rows / sizeof *rows; r++) {
        float *samples = lead_new(ecg, 1, 0.2, 0.03);
        for (int64_t i = 0; i < ecg->count; i++)
            samples[i] = samples[i] * rows[r].gain + rows[r].offset;
        struct train train = beats_of_lead(ecg, samples);
        cr_assert_eq(train.count, usual.count, "row %zu", r);
        for (size_t i = 0; i < train.count; i++)
            cr_expect_leq(llabs(train.events[i].time_ns - usual.events[i].time_ns), NS_PER_MS);
        train_free(&train);
    }
    train_free(&usual);
    free(ecg);
}

/* A lead off for 5 s: nothing is found in it, and the beat after it says so. Three samples lost
 * on the line hide nothing. */
Test(beats, no_beats_inside_a_gap_and_a_flag_after_it)
{
    struct ecg *ecg = ecg_new(250, 60, 0.8);
    float *samples = lead_new(ecg, 1, 0.2, 0.02);
    for (int64_t i = 20 * 250; i < 25 * 250; i++)
        samples[i] = NAN;
    for (int64_t i = 40 * 250; i < 40 * 250 + 3; i++)
        samples[i] = NAN;
    struct train train = beats_of_lead(ecg, samples);
    size_t flagged = 0;
    for (size_t i = 0; i < train.count; i++) {
        double at_s = s_from_ns(train.events[i].time_ns);
        cr_expect(at_s <= 20 || at_s >= 25, "a beat at %g s", at_s);
        if (train.events[i].flags & TRAIN_GAP) {
            flagged++;
            cr_expect(at_s > 25 && at_s < 26.2, "flag at %g s", at_s);
        }
    }
    cr_expect_eq(flagged, 1);
    struct score after = score(ecg, &train, 26.2, 60), before = score(ecg, &train, 0, 19.8);
    cr_expect_eq(after.missed + after.extra + before.missed + before.extra, 0);
    train_free(&train);
    free(ecg);
}

/* The second recording of a case comes 60 years later (a clock that was never set): the search does
 * not walk through them, and finds what it finds in that recording alone. */
Test(beats, a_pause_of_years_costs_nothing, .timeout = 20)
{
    struct ecg *ecg = ecg_new(250, 40, 0.8);
    const int64_t later_ns = 60 * 365 * NS_PER_DAY;
    struct trace *traces[] = {trace_of(ecg, lead_new(ecg, 1, 0.1, 0.02), 0),
                              trace_of(ecg, lead_new(ecg, 1, 0.1, 0.02), later_ns)};
    struct train alone = beats_of((const struct trace *const *)traces, 1, 4096);
    struct train both = beats_of((const struct trace *const *)traces, 2, 4096);
    cr_assert_eq(both.count, 2 * alone.count);
    for (size_t i = 0; i < alone.count; i++) {
        cr_expect_eq(both.events[i].time_ns, alone.events[i].time_ns);
        cr_expect_eq(both.events[i + alone.count].time_ns, alone.events[i].time_ns + later_ns);
        cr_expect_eq(both.events[i + alone.count].flags, i == 0 ? TRAIN_GAP : TRAIN_NORMAL);
    }
    train_free(&alone);
    train_free(&both);
    trace_free(traces[0]);
    trace_free(traces[1]);
    free(ecg);
}

/* One lead is noise from 20 s on, the other from the start to 20 s: together they lose nothing. */
Test(beats, leads_stand_in_for_each_other)
{
    struct ecg *ecg = ecg_new(500, 60, 0.75);
    float *first = lead_new(ecg, 1, 0.1, 0.02), *second = lead_new(ecg, -0.6, 0.1, 0.02);
    uint32_t seed = 3;
    for (int64_t i = 0; i < ecg->count; i++)
        *(i < 20 * 500 ? &second[i] : &first[i]) += (float)(0.8 * noise_unit(&seed));
    struct trace *traces[] = {trace_of(ecg, first, 0), trace_of(ecg, second, 0)};
    struct train train = beats_of((const struct trace *const *)traces, 2, 4096);
    struct score s = score(ecg, &train, 0, 60);
    cr_expect(s.missed == 0 && s.extra == 0, "missed %zu, extra %zu", s.missed, s.extra);
    train_free(&train);
    trace_free(traces[0]);
    trace_free(traces[1]);
    free(ecg);
}

/* Either lead comes off for a while, in the middle of everything: the other one carries on, and as
 * one of them was always there, nothing is called a gap. */
Test(beats, a_lead_that_comes_off_leaves_no_hole)
{
    struct ecg *ecg = ecg_new(250, 60, 0.7);
    float *first = lead_new(ecg, 1, 0.1, 0.02), *second = lead_new(ecg, 0.5, 0.1, 0.02);
    for (int64_t i = 10 * 250 + 200; i < 23 * 250; i++)
        first[i] = NAN;
    for (int64_t i = 31 * 250; i < 45 * 250 + 90; i++)
        second[i] = NAN;
    struct trace *traces[] = {trace_of(ecg, first, 0), trace_of(ecg, second, 0)};
    struct train train = beats_of((const struct trace *const *)traces, 2, 4096);
    struct score s = score(ecg, &train, 0, 60);
    cr_expect(s.missed == 0 && s.extra == 0, "missed %zu, extra %zu", s.missed, s.extra);
    for (size_t i = 0; i < train.count; i++)
        cr_expect_eq(train.events[i].flags, TRAIN_NORMAL, "at %lld",
                     (long long)train.events[i].time_ns);
    train_free(&train);
    trace_free(traces[0]);
    trace_free(traces[1]);
    free(ecg);
}

/* Cautery for 6 s, twice as high as R: what is found in it is called doubtful, and nothing outside
 * suffers. A second lead that the cautery spares finds them all. */
Test(beats, a_burst_of_noise_is_doubtful_and_soon_over)
{
    struct ecg *ecg = ecg_new(500, 90, 0.8);
    float *first = lead_new(ecg, 1, 0.1, 0.01), *second = lead_new(ecg, 0.4, 0.1, 0.01);
    uint32_t seed = 11;
    for (int64_t i = 40 * 500; i < 46 * 500; i++)
        first[i] += (float)(2 * noise_unit(&seed));
    struct trace *traces[] = {trace_of(ecg, first, 0), trace_of(ecg, second, 0)};
    struct train alone = beats_of((const struct trace *const *)traces, 1, 4096);
    struct train both = beats_of((const struct trace *const *)traces, 2, 4096);
    struct score before = score(ecg, &alone, 0, 39.5), after = score(ecg, &alone, 46.5, 90);
    cr_expect_eq(before.missed + before.extra + after.missed + after.extra, 0);
    size_t inside = 0, doubtful = 0, wrongly = 0;
    for (size_t i = 0; i < alone.count; i++) {
        double at_s = s_from_ns(alone.events[i].time_ns);
        bool flag = alone.events[i].flags & TRAIN_DOUBTFUL;
        bool in_burst = at_s > 40 && at_s < 46;
        inside += in_burst;
        doubtful += in_burst && flag;
        wrongly += flag && (at_s < 38 || at_s > 48);
    }
    cr_expect_geq(10 * doubtful, 8 * inside, "%zu of %zu", doubtful, inside);
    cr_expect_eq(wrongly, 0);
    struct score fused = score(ecg, &both, 0, 90);
    cr_expect(fused.missed == 0 && fused.extra == 0, "missed %zu, extra %zu", fused.missed,
              fused.extra);
    train_free(&alone);
    train_free(&both);
    trace_free(traces[0]);
    trace_free(traces[1]);
    free(ecg);
}

/* The R wave shrinks to a fifth within 10 s and comes back. */
Test(beats, a_change_of_amplitude_is_followed)
{
    struct ecg *ecg = ecg_new(250, 90, 0.8);
    float *samples = lead_new(ecg, 1, 0, 0.01);
    for (int64_t i = 0; i < ecg->count; i++) {
        double at_s = (double)i / 250;
        double gain = at_s < 30   ? 1
                      : at_s < 40 ? 1 - 0.08 * (at_s - 30)
                      : at_s < 60 ? 0.2
                      : at_s < 70 ? 0.2 + 0.08 * (at_s - 60)
                                  : 1;
        samples[i] *= (float)gain;
    }
    struct train train = beats_of_lead(ecg, samples);
    struct score s = score(ecg, &train, 0, 90);
    cr_expect(s.missed == 0 && s.extra == 0, "missed %zu, extra %zu", s.missed, s.extra);
    train_free(&train);
    free(ecg);
}

Test(beats, silence_and_short_recordings_give_no_beats)
{
    static const int64_t lengths[] = {1, 2, 30, 5000};
    for (size_t i = 0; i < 4; i++) {
        for (int kind = 0; kind < 2; kind++) {
            struct ecg ecg = {.rate_hz = 250, .count = lengths[i]};
            float *samples = malloc((size_t)lengths[i] * sizeof *samples);
            cr_assert_not_null(samples);
            for (int64_t k = 0; k < lengths[i]; k++)
                samples[k] = kind == 0 ? 1.25f : NAN;
            struct train train = beats_of_lead(&ecg, samples);
            cr_expect_eq(train.count, 0, "length %lld", (long long)lengths[i]);
            train_free(&train);
        }
    }
}

Test(beats, what_cannot_be_searched_is_refused)
{
    const struct derivation *beats = derivation_find("beats");
    struct derive_input input = {.threads = 1};
    struct derived out = {0};
    struct err err = {0};
    cr_expect_eq(beats->compute(&input, &out, &err), ERR_USAGE);
    cr_expect_str_eq(err.text,
                     "beats needs an ECG channel; give a channel the role ecg with --role");
    struct ecg slow = {.rate_hz = 50, .count = 500};
    float *samples = calloc(500, sizeof *samples);
    cr_assert_not_null(samples);
    struct trace *trace = trace_of(&slow, samples, 0);
    input.channels = (const struct trace *const *)&trace;
    input.channel_count = 1;
    cr_expect_eq(beats->compute(&input, &out, &err), ERR_USAGE);
    cr_expect_str_eq(err.text,
                     "ECG: beats needs an evenly sampled ECG of at least 90 Hz; this has 50 Hz");
    trace_free(trace);
    struct progress progress = {.cancelled = true};
    struct ecg *ecg = ecg_new(250, 20, 0.8);
    trace = trace_of(ecg, lead_new(ecg, 1, 0, 0), 0);
    input.progress = &progress;
    cr_expect_eq(beats->compute(&input, &out, &err), ERR_CANCELLED);
    cr_expect_eq(out.train.count, 0);
    trace_free(trace);
    free(ecg);
}
