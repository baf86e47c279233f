/*
 * columns.c - filling columns of dots, by reading or from the overview. Knows no screen.
 */
#include "terminal/columns.h"

#include <math.h>
#include <stdlib.h>

#include "base/array.h"
#include "dsp/stats.h"

/* Samples that a filter may want on both sides together. */
enum { MARGIN_MOST = 1 << 17 };

int column_room_resize(struct column_room *room, int dots, struct err *err)
{
    void *samples = NULL, *values = NULL, *edges = NULL;
    size_t count = (size_t)(dots > 0 ? dots : 0);
    size_t sample_room = count * OVERVIEW_BLOCK + MARGIN_MOST;
    int failed = array_new(&samples, sample_room, sizeof *room->samples, err);
    if (!failed)
        failed = array_new(&values, 2 * count, sizeof *room->values, err);
    if (!failed)
        failed = array_new(&edges, count + 1, sizeof *room->edges, err);
    if (failed) {
        free(samples);
        free(values);
        return failed;
    }
    column_room_free(room);
    *room = (struct column_room){samples, sample_room, values, edges, dots};
    return ERR_OK;
}

void column_room_free(struct column_room *room)
{
    free(room->samples);
    free(room->values);
    free(room->edges);
    *room = (struct column_room){0};
}

static void widen(struct column *column, float value)
{
    if (isnan(value))
        return;
    if (column->kind != COLUMN_DATA) {
        *column = (struct column){value, value, COLUMN_DATA};
        return;
    }
    column->low = value < column->low ? value : column->low;
    column->high = value > column->high ? value : column->high;
}

/* Number of the first sample of a column that begins at at_ns: to the nearest block where blocks
 * are `whole`, but never across a gap, which would move samples to its other side. */
static int64_t edge_sample(const struct trace *trace, int64_t at_ns, bool whole)
{
    size_t at = run_find(trace->runs, trace->run_count, at_ns);
    if (at == trace->run_count)
        return trace->samples;
    const struct run *run = &trace->runs[at];
    int64_t sample = run_sample_at(run, at_ns);
    int64_t block = (sample + OVERVIEW_BLOCK / 2) / OVERVIEW_BLOCK * OVERVIEW_BLOCK;
    bool inside = at_ns > run->start_ns && block >= run->first && block <= run->first + run->count;
    return whole && inside ? block : sample;
}

static void find_edges(const struct trace *trace, const struct view *view, bool whole,
                       int64_t *edges)
{
    int dots = view_dots(view);
    for (int dot = 0; dot <= dots; dot++)
        edges[dot] = edge_sample(trace, view_dot_ns(view, dot), whole);
}

static bool fill_from_overview(const struct casefile *casefile, const struct trace *trace,
                               const struct view *view, const int64_t *edges, struct column *out)
{
    bool pending = false;
    for (int dot = 0; dot < view_dots(view); dot++) {
        int64_t count = edges[dot + 1] - edges[dot];
        float low = NAN, high = NAN;
        out[dot].kind = COLUMN_NOTHING;
        if (count <= 0)
            continue;
        if (!casefile_minmax(casefile, trace, edges[dot], count, &low, &high)) {
            out[dot].kind = COLUMN_PENDING;
            pending = true;
        } else {
            widen(&out[dot], low);
            widen(&out[dot], high);
        }
    }
    return pending;
}

/* Where neighbouring columns do not meet, the later one reaches back: a steep flank is a line. */
static void join_columns(struct column *columns, const int64_t *edges, const struct trace *trace,
                         int dots)
{
    for (int dot = 1; dot < dots; dot++) {
        struct column *now = &columns[dot];
        const struct column *before = &columns[dot - 1];
        if (now->kind != COLUMN_DATA || before->kind != COLUMN_DATA)
            continue;
        if (run_of_sample(trace->runs, trace->run_count, edges[dot]) !=
            run_of_sample(trace->runs, trace->run_count, edges[dot] - 1))
            continue;
        if (now->low > before->high)
            now->low = before->high;
        if (now->high < before->low)
            now->high = before->low;
    }
}

/* Samples that were read: number `first` and on. */
struct piece {
    const float *samples;
    int64_t first, count;
};

static float sample_of(const struct piece *piece, int64_t number)
{
    int64_t at = number - piece->first;
    return at >= 0 && at < piece->count ? piece->samples[at] : NAN;
}

/* The value of the line between samples at at_ns; NaN outside the run. */
static float value_between(const struct trace *trace, const struct piece *piece, int64_t at_ns)
{
    size_t at = run_find(trace->runs, trace->run_count, at_ns);
    if (at == trace->run_count || at_ns < trace->runs[at].start_ns)
        return NAN;
    const struct run *run = &trace->runs[at];
    double place = (double)(at_ns - run->start_ns) * (double)run->count / (double)run->span_ns;
    int64_t whole = (int64_t)place;
    if (whole >= run->count - 1)
        return NAN;
    float part = (float)(place - (double)whole);
    float before = sample_of(piece, run->first + whole);
    float after = sample_of(piece, run->first + whole + 1);
    return before + part * (after - before);
}

/* Extremes of samples [from, to) as far as they were read. A NaN fails every comparison, and so is
 * left out without being asked for; the loop has no branch and runs as vectors. */
static void widen_all(struct column *column, const struct piece *piece, int64_t from, int64_t to)
{
    const float *samples = piece->samples;
    float low = INFINITY, high = -INFINITY;
    from = from > piece->first ? from - piece->first : 0;
    to = to - piece->first < piece->count ? to - piece->first : piece->count;
    for (int64_t i = from; i < to; i++) {
        low = samples[i] < low ? samples[i] : low;
        high = samples[i] > high ? samples[i] : high;
    }
    if (low <= high) {
        widen(column, low);
        widen(column, high);
    }
}

static void fill_from_samples(const struct trace *trace, const struct view *view,
                              const struct piece *piece, const int64_t *edges, struct column *out)
{
    float left = value_between(trace, piece, view_dot_ns(view, 0));
    for (int dot = 0; dot < view_dots(view); dot++) {
        float right = value_between(trace, piece, view_dot_ns(view, dot + 1));
        out[dot].kind = COLUMN_NOTHING;
        widen(&out[dot], left);
        widen_all(&out[dot], piece, edges[dot], edges[dot + 1]);
        widen(&out[dot], right);
        left = right;
    }
}

/* Each run by itself: what was not recorded in between is no part of the signal. */
static void filter_runs(const struct trace *trace, const struct display_filter *filter,
                        const struct piece *piece, float *samples)
{
    int64_t end = piece->first + piece->count;
    size_t at = run_of_sample(trace->runs, trace->run_count, piece->first);
    for (; at < trace->run_count && trace->runs[at].first < end; at++) {
        const struct run *run = &trace->runs[at];
        int64_t from = run->first > piece->first ? run->first : piece->first;
        int64_t to = run->first + run->count < end ? run->first + run->count : end;
        display_filter_apply(filter, run_rate_hz(run), samples + (from - piece->first),
                             (size_t)(to - from));
    }
}

/* Reads the visible samples, one more on each side for the line to the edge, and the filter's
 * margin. Samples that cannot be read are not there: the recording's problem is told elsewhere. */
static struct piece read_piece(const struct trace *trace, const struct display_filter *filter,
                               const int64_t *edges, int dots, struct column_room *room)
{
    int64_t margin = display_filter_on(filter) ? display_filter_margin(filter, trace->rate_hz) : 0;
    margin = margin < MARGIN_MOST / 2 - 1 ? margin : MARGIN_MOST / 2 - 1;
    int64_t first = edges[0] - margin - 1, end = edges[dots] + margin + 1;
    first = first > 0 ? first : 0;
    end = end < trace->samples ? end : trace->samples;
    struct piece piece = {room->samples, first, end - first};
    if ((uint64_t)piece.count > room->sample_room ||
        trace_read(trace, piece.first, piece.count, room->samples, NULL))
        piece.count = 0;
    if (piece.count > 0 && display_filter_on(filter))
        filter_runs(trace, filter, &piece, room->samples);
    return piece;
}

/* A step trace: each value holds until the next one. */
static void fill_steps(const struct casefile *casefile, const struct trace *trace,
                       const struct view *view, struct column *out)
{
    for (int dot = 0; dot < view_dots(view); dot++) {
        int64_t first, count;
        float low = NAN, high = NAN;
        trace_range(trace, view_dot_ns(view, dot), view_dot_ns(view, dot + 1), &first, &count);
        out[dot].kind = COLUMN_NOTHING;
        /* The held value, unless the recording is over. */
        bool over = first == trace->samples && count == 0;
        if (first > 0 && !over) {
            first--;
            count++;
        }
        if (count > 0 && casefile_minmax(casefile, trace, first, count, &low, &high)) {
            widen(&out[dot], low);
            widen(&out[dot], high);
        } else if (count > 0) {
            out[dot].kind = COLUMN_PENDING;
        }
    }
}

static bool any_pending(const struct column *columns, int dots)
{
    for (int dot = 0; dot < dots; dot++) {
        if (columns[dot].kind == COLUMN_PENDING)
            return true;
    }
    return false;
}

struct columns_answer columns_fill(const struct casefile *casefile, const struct trace *trace,
                                   const struct display_filter *filter, const struct view *view,
                                   struct column_room *room, struct column *out)
{
    int dots = view_dots(view);
    struct columns_answer answer = {false, false};
    if (trace->times_ns) {
        fill_steps(casefile, trace, view, out);
        answer.pending = any_pending(out, dots);
        answer.unfiltered = display_filter_on(filter);
        return answer;
    }
    int64_t first, count;
    trace_range(trace, view->from_ns, view->from_ns + view->span_ns, &first, &count);
    bool by_overview = count >= (int64_t)dots * OVERVIEW_BLOCK;
    find_edges(trace, view, by_overview, room->edges);
    if (by_overview) {
        answer.pending = fill_from_overview(casefile, trace, view, room->edges, out);
        answer.unfiltered = display_filter_on(filter);
        join_columns(out, room->edges, trace, dots);
    } else {
        struct piece piece = read_piece(trace, filter, room->edges, dots, room);
        fill_from_samples(trace, view, &piece, room->edges, out);
    }
    return answer;
}

bool columns_range(const struct column *columns, int dots, struct column_room *room, double *low,
                   double *high)
{
    size_t count = 0;
    double *lows = room->values, *highs = room->values + dots;
    for (int dot = 0; dot < dots; dot++) {
        if (columns[dot].kind != COLUMN_DATA)
            continue;
        lows[count] = (double)columns[dot].low;
        highs[count++] = (double)columns[dot].high;
    }
    if (count == 0)
        return false;
    size_t cut = count / 50;
    *low = select_kth(lows, count, cut);
    *high = select_kth(highs, count, count - 1 - cut);
    if (*low > *high) {
        double swap = *low;
        *low = *high;
        *high = swap;
    }
    return true;
}
