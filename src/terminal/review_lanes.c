/*
 * review_lanes.c - how the traces are shown: which, in what order, how tall, gain, filters.
 */
#include <math.h>
#include <string.h>

#include "terminal/review_impl.h"

enum { LANE_ROWS_MOST = 24 };

static bool same_filter(const struct display_filter *a, const struct display_filter *b)
{
    return a->high_pass == b->high_pass && a->low_pass == b->low_pass && a->notch == b->notch;
}

static bool same_view(const struct view *a, const struct view *b)
{
    return a->from_ns == b->from_ns && a->span_ns == b->span_ns && a->cells == b->cells;
}

void lane_refresh(struct review *review, struct lane *lane)
{
    if (lane->drawn && same_view(&lane->drawn_view, &review->view) &&
        same_filter(&lane->drawn_filter, &lane->filter))
        return;
    lane->answer = columns_fill(review->casefile, lane->trace, &lane->filter, &review->view,
                                &review->room, lane->columns);
    lane->ranged = columns_range(lane->columns, view_dots(&review->view), &review->room, &lane->low,
                                 &lane->high);
    lane->drawn = !lane->answer.pending;
    lane->drawn_view = review->view;
    lane->drawn_filter = lane->filter;
}

void lane_range(const struct lane *lane, double *low, double *high)
{
    if (!lane->fixed) {
        range_round(lane->ranged, lane->low, lane->high, low, high);
        return;
    }
    *low = lane->centre - lane->per_division * LANE_DIVISIONS / 2;
    *high = lane->centre + lane->per_division * LANE_DIVISIONS / 2;
}

/* Fixes the gain where the automatic one is, rounded, then changes it by one step. */
static void change_gain(struct lane *lane, bool larger)
{
    if (!lane->fixed) {
        double low, high;
        lane_range(lane, &low, &high);
        lane->per_division = round_step((high - low) / LANE_DIVISIONS);
        lane->centre = round((low + high) / 2 / lane->per_division) * lane->per_division;
        lane->fixed = true;
    }
    lane->per_division =
        larger ? round_step(lane->per_division / 2.6) : round_step(lane->per_division * 1.01);
}

static void move_focus(struct review *review, bool down)
{
    size_t number = lane_focus_number(review);
    if (down ? number + 1 < lanes_shown(review) : number > 0)
        review->focus = lane_shown_at(review, down ? number + 1 : number - 1);
}

static void move_lane(struct review *review, bool down)
{
    size_t from = review->focus;
    move_focus(review, down);
    struct lane moved = review->lanes[from];
    review->lanes[from] = review->lanes[review->focus];
    review->lanes[review->focus] = moved;
}

static void hide_lane(struct review *review)
{
    struct lane *lane = &review->lanes[review->focus];
    size_t number = lane_focus_number(review);
    lane->hidden = true;
    size_t shown = lanes_shown(review);
    if (number >= shown && number > 0)
        number--;
    review->focus = lane_shown_at(review, number);
    review_say(review, INK_DIM, "%s hidden; \\ shows all hidden traces", lane->trace->name);
}

static void show_lanes(struct review *review)
{
    for (size_t i = 0; i < review->lane_count; i++)
        review->lanes[i].hidden = false;
    if (review->focus >= review->lane_count)
        review->focus = lane_shown_at(review, 0);
}

static void change_height(struct review *review, int by)
{
    int now = review->lane_rows > 0 ? review->lane_rows : lane_height(review, 0);
    int wanted = now + by;
    review->lane_rows = wanted < 1 ? 1 : wanted > LANE_ROWS_MOST ? LANE_ROWS_MOST : wanted;
}

static void say_filter(struct review *review)
{
    const struct lane *lane = &review->lanes[review->focus];
    char text[FILTER_TEXT_SIZE];
    display_filter_text(&lane->filter, text);
    review_say(review, INK_DIM, "%s: %s%s", lane->trace->name,
               *text ? "drawn through " : "no filter", text);
}

static bool filter_action(struct review *review, enum action action)
{
    struct lane *lane = &review->lanes[review->focus];
    double rate_hz = lane->trace->rate_hz;
    if (action != ACTION_HIGH_PASS && action != ACTION_LOW_PASS && action != ACTION_NOTCH)
        return false;
    if (lane->trace->times_ns) {
        review_say(review, INK_WARN, "%s has no even rate: it cannot be filtered",
                   lane->trace->name);
        return true;
    }
    if (action == ACTION_HIGH_PASS)
        display_filter_next_high_pass(&lane->filter, rate_hz);
    else if (action == ACTION_LOW_PASS)
        display_filter_next_low_pass(&lane->filter, rate_hz);
    else
        display_filter_next_notch(&lane->filter, rate_hz);
    say_filter(review);
    return true;
}

static bool gain_action(struct review *review, enum action action)
{
    struct lane *lane = &review->lanes[review->focus];
    switch (action) {
    case ACTION_GAIN_UP:
    case ACTION_GAIN_DOWN:
        change_gain(lane, action == ACTION_GAIN_UP);
        review_say(review, INK_DIM, "%s: %g %s a division, %d divisions a lane; ~ fits again",
                   lane->trace->name, lane->per_division, lane->trace->unit, LANE_DIVISIONS);
        return true;
    case ACTION_GAIN_AUTOMATIC:
        lane->fixed = false;
        review_say(review, INK_DIM, "%s: fitted to what is visible", lane->trace->name);
        return true;
    default:
        return filter_action(review, action);
    }
}

static bool order_action(struct review *review, enum action action)
{
    switch (action) {
    case ACTION_LANE_UP:
    case ACTION_LANE_DOWN:
        move_focus(review, action == ACTION_LANE_DOWN);
        return true;
    case ACTION_LANE_RAISE:
    case ACTION_LANE_SINK:
        move_lane(review, action == ACTION_LANE_SINK);
        return true;
    case ACTION_LANES_TALLER:
    case ACTION_LANES_LOWER:
        change_height(review, action == ACTION_LANES_TALLER ? 1 : -1);
        return true;
    case ACTION_LANE_HIDE:
        hide_lane(review);
        return true;
    case ACTION_LANES_SHOW:
        show_lanes(review);
        return true;
    default:
        return false;
    }
}

bool review_lane_action(struct review *review, enum action action)
{
    bool mine = order_action(review, action);
    if (!mine && review->focus < review->lane_count)
        mine = gain_action(review, action);
    if (mine)
        review_scroll_lanes(review);
    return mine;
}
