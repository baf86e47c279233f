/*
 * heart_rate.c - the derivation `heart-rate`: the instantaneous rate of a train of beats on an
 * even grid, after Berger et al. 1986. Finds no beats and corrects none.
 *
 * At time t of a grid of rate fs the rate is fs * n / 2, n being the number of beat-to-beat
 * intervals, fractions included, inside [t - 1/fs, t + 1/fs]. The area under the curve is exactly
 * the number of intervals, and nothing overshoots. The published check values are in
 * tests/published/test_heart_rate.c.
 */
#include <math.h>
#include <stdbool.h>
#include <stdlib.h>

#include "base/array.h"
#include "dsp/stats.h"
#include "physiology/derivation.h"

#define SILENCE_NS 60e9

enum { PARAMETER_RATE, PARAMETER_LONGEST };

/* Where an instant lies among the beats; moves forward only. */
struct place {
    size_t beat; /* interval from this beat to the next */
    double part; /* how much of it has passed, 0..1 */
};

struct sweep {
    const struct train *beats;
    const size_t *last_bad; /* shape (beats): 1 + the last interval up to this that is not valid */
    struct place from, to;
};

static double beat_ns(const struct train *beats, size_t i)
{
    return (double)beats->events[i].time_ns;
}

/* The interval from beat i to the next: a real one, and not too long to be one. */
static bool interval_valid(const struct train *beats, size_t i, double longest_ns)
{
    return !(beats->events[i + 1].flags & TRAIN_GAP) &&
           beat_ns(beats, i + 1) - beat_ns(beats, i) <= longest_ns;
}

/* Moves place to at_ns, which lies between the first and the last beat. On a beat it stays in the
 * interval before it, so that a window is not charged with an interval it only touches. */
static void place_move(struct place *place, const struct train *beats, double at_ns)
{
    while (place->beat + 2 < beats->count && beat_ns(beats, place->beat + 1) < at_ns)
        place->beat++;
    double start = beat_ns(beats, place->beat), end = beat_ns(beats, place->beat + 1);
    place->part = (at_ns - start) / (end - start);
}

/* Beats a minute around at_ns; NaN when the window reaches an interval that is not valid. */
static float rate_at(struct sweep *sweep, double at_ns, double period_ns)
{
    const struct train *beats = sweep->beats;
    double from = at_ns - period_ns, to = at_ns + period_ns;
    if (from < beat_ns(beats, 0) || to > beat_ns(beats, beats->count - 1))
        return NAN;
    place_move(&sweep->from, beats, from);
    place_move(&sweep->to, beats, to);
    size_t first = sweep->from.beat + (sweep->from.part >= 1 ? 1 : 0);
    if (sweep->last_bad[sweep->to.beat] > first)
        return NAN;
    double intervals = (double)(sweep->to.beat - sweep->from.beat);
    intervals += sweep->to.part - sweep->from.part;
    return (float)(intervals * 60e9 / (2 * period_ns));
}

static void mark_bad(const struct train *beats, double longest_ns, size_t *last_bad)
{
    size_t last = 0;
    for (size_t i = 0; i + 1 < beats->count; i++) {
        if (!interval_valid(beats, i, longest_ns))
            last = i + 1;
        last_bad[i] = last;
    }
}

/* The usual interval: how far one wrong beat spreads. `scratch`, shape (beats). */
static double usual_interval_ns(const struct train *beats, double longest_ns, double *scratch)
{
    size_t count = 0;
    for (size_t i = 0; i + 1 < beats->count; i++) {
        if (interval_valid(beats, i, longest_ns))
            scratch[count++] = beat_ns(beats, i + 1) - beat_ns(beats, i);
    }
    return count > 0 ? median(scratch, count) : 0;
}

/* The grid: runs of even samples, one for each stretch of beats. first_point is the number of the
 * first grid point of a run, counted from case time 0. */
struct grid {
    struct run *runs;      /* shape (count) */
    int64_t *first_points; /* shape (count) */
    size_t count;
    int64_t samples;
};

static void grid_free(struct grid *grid)
{
    free(grid->runs);
    free(grid->first_points);
}

/* Adds the points k with first beat <= k * period <= last beat of a stretch, if there are any. They
 * go through case time 0, so that they do not depend on where the beats begin. */
static void add_stretch(struct grid *grid, const struct train *beats, size_t first, size_t last,
                        double period_ns)
{
    int64_t low = (int64_t)ceil(beat_ns(beats, first) / period_ns);
    int64_t high = (int64_t)floor(beat_ns(beats, last) / period_ns);
    if (high < low)
        return;
    int64_t count = high - low + 1;
    grid->first_points[grid->count] = low;
    grid->runs[grid->count++] = (struct run){.start_ns = llround((double)low * period_ns),
                                             .span_ns = llround((double)count * period_ns),
                                             .first = grid->samples,
                                             .count = count};
    grid->samples += count;
}

/* Nothing is laid out over a silence of SILENCE_NS: recordings may be years apart. */
static bool is_silence(const struct train *beats, size_t i)
{
    return beat_ns(beats, i + 1) - beat_ns(beats, i) > SILENCE_NS;
}

static int grid_new(struct grid *grid, const struct train *beats, double period_ns, struct err *err)
{
    size_t most = 1;
    for (size_t i = 0; i + 1 < beats->count; i++)
        most += is_silence(beats, i);
    void *runs = NULL, *points = NULL;
    int failed = array_new(&runs, most, sizeof(struct run), err);
    if (!failed)
        failed = array_new(&points, most, sizeof(int64_t), err);
    *grid = (struct grid){.runs = runs, .first_points = points};
    if (failed)
        return failed;
    size_t first = 0;
    for (size_t i = 0; i < beats->count; i++) {
        if (i + 1 < beats->count && !is_silence(beats, i))
            continue;
        if (i > first)
            add_stretch(grid, beats, first, i, period_ns);
        first = i + 1;
    }
    return ERR_OK;
}

static int fill_rates(const struct derive_input *input, const struct grid *grid, double period_ns,
                      float *values, double *reach_ns, struct err *err)
{
    const struct train *beats = input->train;
    double longest_ns = input->parameters[PARAMETER_LONGEST] * 1e9;
    void *last_bad = NULL, *scratch = NULL;
    int failed = array_new(&last_bad, beats->count, sizeof(size_t), err);
    if (!failed)
        failed = array_new(&scratch, beats->count, sizeof(double), err);
    if (!failed) {
        mark_bad(beats, longest_ns, last_bad);
        *reach_ns = period_ns + usual_interval_ns(beats, longest_ns, scratch);
        struct sweep sweep = {.beats = beats, .last_bad = last_bad};
        for (size_t r = 0; r < grid->count; r++) {
            for (int64_t k = 0; k < grid->runs[r].count; k++)
                *values++ =
                    rate_at(&sweep, (double)(grid->first_points[r] + k) * period_ns, period_ns);
        }
    }
    free(last_bad);
    free(scratch);
    return failed;
}

static int make_trace(const struct derive_input *input, const struct grid *grid, double period_ns,
                      struct trace **out, struct err *err)
{
    void *values;
    int failed = array_new(&values, (size_t)grid->samples, sizeof(float), err);
    if (failed)
        return failed;
    double reach_ns = period_ns;
    if (grid->samples > 0)
        failed = fill_rates(input, grid, period_ns, values, &reach_ns, err);
    if (!failed)
        failed = memory_trace_new("heart-rate", "/min", grid->runs, grid->count, values,
                                  (int64_t)reach_ns, out, err);
    if (failed)
        free(values);
    return failed;
}

static int compute_heart_rate(const struct derive_input *input, struct derived *out,
                              struct err *err)
{
    if (!input->train)
        return err_set(err, ERR_USAGE, "heart-rate needs the train of beats");
    double period_ns = 1e9 / input->parameters[PARAMETER_RATE];
    struct grid grid;
    int failed = grid_new(&grid, input->train, period_ns, err);
    if (!failed)
        failed = make_trace(input, &grid, period_ns, &out->trace, err);
    grid_free(&grid);
    return failed;
}

static const struct parameter heart_rate_parameters[] = {
    {"rate", "Hz", 4, 0.1, 100, NULL, "samples a second of the result"},
    {"longest", "s", 3, 0.5, 30, NULL,
     "an interval longer than this is no interval but missed beats"},
    {0},
};

const struct derivation derivation_heart_rate = {
    .name = "heart-rate",
    .kind = DERIVES_TRACE,
    .role = ROLE_ECG,
    .one_channel = false,
    .needs_train = "beats",
    .unit = "/min",
    .parameters = heart_rate_parameters,
    .summary = "instantaneous heart rate from beat to beat, on an even grid through case time 0",
    .source = "Berger, Akselrod, Gordon & Cohen 1986, IEEE Trans Biomed Eng 33:900; intervals "
              "above 3 s (20 /min, the least rate that Sun, Reisner & Mark 2006, Comput Cardiol "
              "33:13, take for real) are left out",
    .edges =
        "Not valid where the window, one sample to each side, reaches beyond the first or last "
        "beat, into the interval across a gap, or into one above `longest`; no "
        "samples at all over a silence of more than a minute.",
    .version = "1",
    .compute = compute_heart_rate,
};
