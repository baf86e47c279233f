/*
 * review_layout.c - what goes where, for every size of screen. Draws nothing.
 *
 * Small screens lose parts in this order: the list, the strip, the rail, the axis, the title, the
 * line of the chosen mark. What stays to the last is the line that reads the cursor.
 */
#include "terminal/review_impl.h"

enum {
    BESIDE_FROM = 120,   /* columns from which the list stands beside the traces */
    LANE_ROWS_LEAST = 2, /* automatic height: name and value in one row, range in the other */
    LIST_BELOW_ROWS = 4,
};

static int rail_rows(int rows)
{
    return rows < 10 ? 0 : rows < 16 ? 1 : rows < 30 ? 2 : rows < 45 ? 3 : 4;
}

/* Rows of each part, from the height of the screen. */
static void choose_rows(const struct review *review, struct layout *layout)
{
    int rows = review->rows;
    layout->title.rows = rows >= 6 ? 1 : 0;
    layout->strip.rows = rows >= 16 ? 2 : 0;
    layout->axis.rows = rows >= 9 ? 1 : 0;
    layout->rail.rows = rail_rows(rows);
    layout->mark.rows = rows >= 4 ? 1 : 0;
    layout->readout.rows = 1;
    layout->hint.rows = rows >= 2 ? 1 : 0;
    layout->list_beside = review->columns >= BESIDE_FROM;
    if (review->list_open && !layout->list_beside && rows >= 22)
        layout->list.rows = LIST_BELOW_ROWS + (rows - 22) / 4;
    int taken = layout->title.rows + layout->strip.rows + layout->axis.rows + layout->rail.rows +
                layout->list.rows + layout->mark.rows + layout->readout.rows + layout->hint.rows;
    layout->lanes.rows = rows - taken > 0 ? rows - taken : 0;
}

static void choose_columns(const struct review *review, struct layout *layout)
{
    int columns = review->columns;
    layout->gutter = columns >= 160 ? 24 : columns >= 60 ? 18 : columns >= 36 ? 12 : 0;
    int beside = 0;
    if (review->list_open && layout->list_beside)
        beside = columns >= 180 ? 50 : 40;
    struct part *narrow[] = {&layout->axis, &layout->lanes, &layout->rail};
    struct part *wide[] = {&layout->title, &layout->strip,   &layout->list,
                           &layout->mark,  &layout->readout, &layout->hint};
    for (size_t i = 0; i < sizeof narrow / sizeof *narrow; i++)
        narrow[i]->columns = columns - beside;
    for (size_t i = 0; i < sizeof wide / sizeof *wide; i++)
        wide[i]->columns = columns;
}

static void stack(struct layout *layout)
{
    struct part *order[] = {&layout->title, &layout->strip,   &layout->axis,
                            &layout->lanes, &layout->rail,    &layout->list,
                            &layout->mark,  &layout->readout, &layout->hint};
    int row = 0;
    for (size_t i = 0; i < sizeof order / sizeof *order; i++) {
        order[i]->row = row;
        row += order[i]->rows;
    }
}

void review_relayout(struct review *review)
{
    struct layout layout = {0};
    choose_rows(review, &layout);
    choose_columns(review, &layout);
    stack(&layout);
    if (review->list_open && layout.list_beside && layout.lanes.rows > 0) {
        int column = layout.lanes.columns;
        layout.list = (struct part){layout.axis.row, column, 0, review->columns - column};
        layout.list.rows = layout.axis.rows + layout.lanes.rows + layout.rail.rows;
    }
    review->layout = layout;
    int cells = layout.lanes.columns - layout.gutter;
    review->view.cells = cells > 1 ? cells : 1;
    review_scroll_lanes(review);
}

size_t lane_focus_number(const struct review *review)
{
    size_t number = 0;
    for (size_t i = 0; i < review->focus && i < review->lane_count; i++)
        number += !review->lanes[i].hidden;
    return number;
}

void review_scroll_lanes(struct review *review)
{
    size_t number = lane_focus_number(review), shown = lanes_shown(review);
    size_t room = lanes_on_screen(review);
    if (number < review->first_lane)
        review->first_lane = number;
    else if (number >= review->first_lane + room)
        review->first_lane = number + 1 - room;
    if (review->first_lane + room > shown)
        review->first_lane = shown - room;
}

size_t lanes_shown(const struct review *review)
{
    size_t count = 0;
    for (size_t i = 0; i < review->lane_count; i++)
        count += !review->lanes[i].hidden;
    return count;
}

size_t lane_shown_at(const struct review *review, size_t nth)
{
    for (size_t i = 0; i < review->lane_count; i++) {
        if (!review->lanes[i].hidden && nth-- == 0)
            return i;
    }
    return review->lane_count;
}

size_t lanes_on_screen(const struct review *review)
{
    int rows = review->layout.lanes.rows;
    int least = review->lane_rows > 0 ? review->lane_rows : LANE_ROWS_LEAST;
    size_t shown = lanes_shown(review), room = (size_t)(rows / least);
    if (room == 0 && rows > 0)
        room = 1;
    return shown < room ? shown : room;
}

int lane_height(const struct review *review, size_t nth)
{
    int rows = review->layout.lanes.rows, on_screen = (int)lanes_on_screen(review);
    if (on_screen == 0)
        return 0;
    if (review->lane_rows > 0)
        return review->lane_rows < rows ? review->lane_rows : rows;
    return rows / on_screen + ((int)nth < rows % on_screen ? 1 : 0);
}

/* The chosen mark stays in the middle, except near the ends. */
size_t list_first(const struct review *review)
{
    int rows = review->layout.list.rows;
    size_t chosen = review_chosen_index(review), count = review->mark_count;
    size_t room = rows > 1 ? (size_t)rows - 1 : 0;
    size_t first = chosen < count && chosen > room / 2 ? chosen - room / 2 : 0;
    if (first + room > count)
        first = count > room ? count - room : 0;
    return first;
}
