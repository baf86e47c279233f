/*
 * review_time.c - moving in time: cursor, scroll, zoom, from mark to mark.
 */
#include <stdlib.h>
#include <string.h>

#include "terminal/review_impl.h"

static const int64_t zoom_steps_ns[] = {
    NS_PER_MS,        2 * NS_PER_MS,    5 * NS_PER_MS,   10 * NS_PER_MS,  20 * NS_PER_MS,
    50 * NS_PER_MS,   100 * NS_PER_MS,  200 * NS_PER_MS, 500 * NS_PER_MS, NS_PER_S,
    2 * NS_PER_S,     5 * NS_PER_S,     10 * NS_PER_S,   20 * NS_PER_S,   30 * NS_PER_S,
    NS_PER_MIN,       2 * NS_PER_MIN,   5 * NS_PER_MIN,  10 * NS_PER_MIN, 20 * NS_PER_MIN,
    30 * NS_PER_MIN,  NS_PER_HOUR,      2 * NS_PER_HOUR, 4 * NS_PER_HOUR, 8 * NS_PER_HOUR,
    12 * NS_PER_HOUR, 24 * NS_PER_HOUR,
};
enum { ZOOM_STEPS = sizeof zoom_steps_ns / sizeof *zoom_steps_ns };

static int64_t clamp(int64_t value, int64_t low, int64_t high)
{
    return value < low ? low : value > high ? high : value;
}

static int64_t case_span(const struct review *review)
{
    return review->extent_to_ns - review->extent_from_ns;
}

void review_set_view(struct review *review, int64_t from_ns, int64_t span_ns)
{
    int64_t most = case_span(review) > zoom_steps_ns[0] ? case_span(review) : zoom_steps_ns[0];
    /* A short recording may be seen with empty room after it, up to the usual first width. */
    most = most > 10 * NS_PER_S ? most : 10 * NS_PER_S;
    struct view *view = &review->view;
    view->span_ns = clamp(span_ns, zoom_steps_ns[0], most);
    int64_t last = review->extent_to_ns - view->span_ns;
    last = last > review->extent_from_ns ? last : review->extent_from_ns;
    view->from_ns = clamp(from_ns, review->extent_from_ns, last);
}

static int64_t distance(const struct review *review, size_t index)
{
    return llabs(review->marks[index].onset_ns - review->cursor_ns);
}

void review_choose_nearest(struct review *review)
{
    if (review->mark_count == 0) {
        review->chosen_id = 0;
        return;
    }
    size_t best = review_chosen_index(review);
    for (size_t i = 0; i < review->mark_count; i++) {
        if (best == review->mark_count || distance(review, i) < distance(review, best))
            best = i;
    }
    review->chosen_id = review->marks[best].id;
}

/* Scrolls, by whole columns, so that the cursor is a quarter of the width inside the edge it
 * left: the traces then stand still for a while. */
static void scroll_to_cursor(struct review *review)
{
    struct view *view = &review->view;
    int64_t cell = view_cell_at(view, review->cursor_ns);
    if (cell >= 0 && cell < view->cells)
        return;
    int64_t wanted = cell < 0 ? view->cells / 4 : view->cells - 1 - view->cells / 4;
    if (cell < -view->cells || cell >= 2 * view->cells)
        wanted = view->cells / 2;
    review_set_view(review, view->from_ns + mul_div(cell - wanted, view->span_ns, view->cells),
                    view->span_ns);
}

void review_go(struct review *review, int64_t at_ns)
{
    review->cursor_ns = clamp(at_ns, review->extent_from_ns, review->extent_to_ns - 1);
    scroll_to_cursor(review);
    review_choose_nearest(review);
}

void review_choose(struct review *review, size_t index)
{
    int64_t id = review->marks[index].id;
    review_go(review, review->marks[index].onset_ns);
    review->chosen_id = id;
}

/* From a cell's instant to the next one's, so that the cursor lands on what a column shows. */
static void by_cells(struct review *review, int64_t cells)
{
    const struct view *view = &review->view;
    int64_t cell = view_cell_at(view, review->cursor_ns) + cells;
    int64_t at = view->from_ns + mul_div(2 * cell + 1, view->span_ns, 2 * (int64_t)view->cells);
    review_go(review, at);
}

static void by_samples(struct review *review, int64_t samples)
{
    const struct trace *trace = review->lanes[review->focus].trace;
    int64_t first, count;
    /* The first sample after the cursor, or the last before it. */
    trace_range(trace, review->cursor_ns + (samples > 0 ? 1 : 0), INT64_MAX, &first, &count);
    int64_t wanted = samples > 0 ? first : first - 1;
    if (wanted >= 0 && wanted < trace->samples)
        review_go(review, trace_time_ns(trace, wanted));
}

static void by_page(struct review *review, int pages)
{
    struct view *view = &review->view;
    int64_t from = view->from_ns;
    review_set_view(review, from + pages * view->span_ns, view->span_ns);
    int64_t moved = view->from_ns - from;
    int64_t end = pages < 0 ? review->extent_from_ns : review->extent_to_ns;
    review_go(review, moved != 0 ? review->cursor_ns + moved : end);
}

/* Keeps the cursor's column where it is. */
static void zoom_to(struct review *review, int64_t span_ns)
{
    const struct view *view = &review->view;
    int64_t cell = clamp(view_cell_at(view, review->cursor_ns), 0, view->cells - 1);
    int64_t before = mul_div(2 * cell + 1, span_ns, 2 * (int64_t)view->cells);
    review_set_view(review, review->cursor_ns - before, span_ns);
    scroll_to_cursor(review);
}

static void zoom(struct review *review, bool in)
{
    int64_t span = review->view.span_ns;
    int at = in ? ZOOM_STEPS - 1 : 0;
    while (in ? at > 0 && zoom_steps_ns[at] >= span
              : at < ZOOM_STEPS - 1 && zoom_steps_ns[at] <= span)
        at += in ? -1 : 1;
    zoom_to(review, zoom_steps_ns[at]);
}

enum { ANY, SAME_CODE, SAME_STATE };

static bool fits(const struct mark *mark, const struct mark *chosen, int what)
{
    if (what == SAME_CODE)
        return strcmp(mark->code, chosen->code) == 0;
    return what == ANY || mark->state == chosen->state;
}

/* Steps from the chosen mark when the cursor is on it, from the cursor otherwise. */
static void step_mark(struct review *review, bool on, int what)
{
    size_t chosen = review_chosen_index(review), count = review->mark_count;
    bool here = review->marks[chosen].onset_ns == review->cursor_ns;
    for (size_t n = 0; n < count; n++) {
        size_t i = on ? n : count - 1 - n;
        int64_t onset = review->marks[i].onset_ns;
        bool beyond = on ? (here ? i > chosen : onset > review->cursor_ns)
                         : (here ? i < chosen : onset < review->cursor_ns);
        if (beyond && fits(&review->marks[i], &review->marks[chosen], what)) {
            review_choose(review, i);
            return;
        }
    }
    review_say(review, INK_DIM, "no %s mark%s", on ? "later" : "earlier",
               what == SAME_CODE    ? " of this code"
               : what == SAME_STATE ? " in this state"
                                    : "");
}

static void toggle_second(struct review *review)
{
    bool here = review->second_ns == review->cursor_ns;
    review->second_ns = here ? NS_NONE : review->cursor_ns;
    review_say(review, INK_DIM, "%s",
               here ? "second cursor away"
                    : "second cursor set here; move on to measure, Space twice puts it away");
}

static bool zoom_action(struct review *review, enum action action)
{
    switch (action) {
    case ACTION_ZOOM_IN:
        zoom(review, true);
        return true;
    case ACTION_ZOOM_OUT:
        zoom(review, false);
        return true;
    case ACTION_SHOW_SECOND:
        zoom_to(review, NS_PER_S);
        return true;
    case ACTION_SHOW_TEN_SECONDS:
        zoom_to(review, 10 * NS_PER_S);
        return true;
    case ACTION_SHOW_MINUTE:
        zoom_to(review, NS_PER_MIN);
        return true;
    case ACTION_SHOW_TEN_MINUTES:
        zoom_to(review, 10 * NS_PER_MIN);
        return true;
    case ACTION_SHOW_HOUR:
        zoom_to(review, NS_PER_HOUR);
        return true;
    case ACTION_SHOW_CASE:
        zoom_to(review, case_span(review));
        return true;
    default:
        return false;
    }
}

static bool step_action(struct review *review, enum action action)
{
    switch (action) {
    case ACTION_MARK_BACK:
    case ACTION_MARK_ON:
        step_mark(review, action == ACTION_MARK_ON, ANY);
        return true;
    case ACTION_CODE_BACK:
    case ACTION_CODE_ON:
        step_mark(review, action == ACTION_CODE_ON, SAME_CODE);
        return true;
    case ACTION_STATE_BACK:
    case ACTION_STATE_ON:
        step_mark(review, action == ACTION_STATE_ON, SAME_STATE);
        return true;
    default:
        return false;
    }
}

bool review_time_action(struct review *review, enum action action)
{
    switch (action) {
    case ACTION_CELL_BACK:
    case ACTION_CELL_ON:
        by_cells(review, action == ACTION_CELL_ON ? 1 : -1);
        return true;
    case ACTION_SAMPLE_BACK:
    case ACTION_SAMPLE_ON:
        by_samples(review, action == ACTION_SAMPLE_ON ? 1 : -1);
        return true;
    case ACTION_SECOND_BACK:
    case ACTION_SECOND_ON:
        review_go(review, review->cursor_ns + (action == ACTION_SECOND_ON ? 1 : -1) * NS_PER_S);
        return true;
    case ACTION_PAGE_BACK:
    case ACTION_PAGE_ON:
        by_page(review, action == ACTION_PAGE_ON ? 1 : -1);
        return true;
    case ACTION_CASE_START:
        review_go(review, review->extent_from_ns);
        return true;
    case ACTION_CASE_END:
        review_go(review, review->extent_to_ns);
        return true;
    case ACTION_GO_TO:
        review_ask(review, ASK_GO_TO, review->mark_count);
        return true;
    case ACTION_SECOND_CURSOR:
        toggle_second(review);
        return true;
    default:
        return zoom_action(review, action) || step_action(review, action);
    }
}
