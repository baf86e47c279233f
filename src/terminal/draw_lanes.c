/*
 * draw_lanes.c - the traces: gutter with name, unit, scale and the value under the cursor, and the
 * curve beside it; then the lines of marks and cursors over all of them.
 */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "terminal/review_impl.h"

enum { NARROW = 14, MARK_LINE = 0x250a, SECOND_LINE = 0x2506, CURSOR_LINE = 0x2502 };

/* ---- the gutter ---- */

static int put_right(struct canvas *canvas, int row, int end, enum ink ink, const char *text)
{
    int column = end - (int)strlen(text);
    (void)canvas_text(canvas, row, column, end, ink, text);
    return column;
}

struct reading {
    float value, second; /* NaN: none there */
    int64_t age_ns;
};

static struct reading read_cursors(const struct review *review, const struct trace *trace)
{
    struct reading reading = {NAN, NAN, 0};
    int64_t age;
    if (trace_value_at(trace, review->cursor_ns, &reading.value, &reading.age_ns, NULL))
        reading.value = NAN;
    if (review->second_ns != NS_NONE &&
        trace_value_at(trace, review->second_ns, &reading.second, &age, NULL))
        reading.second = NAN;
    return reading;
}

static void age_text(int64_t age_ns, char out[VALUE_TEXT_SIZE])
{
    int64_t seconds = age_ns / NS_PER_S;
    if (seconds < 120)
        (void)snprintf(out, VALUE_TEXT_SIZE, "%d s old", (int)seconds);
    else
        (void)snprintf(out, VALUE_TEXT_SIZE, "%lld min old", (long long)(seconds / 60));
}

/* Where a lane's gutter is, and what its scale runs from and to. */
struct gutter {
    int row, rows, end; /* end: first column that is not the gutter's text */
    double low, high;
    int low_limit; /* column before the bottom's number */
};

/* The value under the cursor, its unit, its age, and how it differs from the second cursor's. */
static void draw_value(const struct review *review, struct canvas *canvas, const struct lane *lane,
                       const struct gutter *gutter)
{
    struct reading reading = read_cursors(review, lane->trace);
    double span = gutter->high - gutter->low;
    bool tall = gutter->rows >= 3, second = review->second_ns != NS_NONE;
    int row = gutter->row + 1, end = gutter->rows == 2 ? gutter->low_limit : gutter->end;
    char text[VALUE_TEXT_SIZE], unit[VALUE_TEXT_SIZE];
    range_number((double)reading.value, span, 1, text);
    if (gutter->rows == 1) {
        (void)put_right(canvas, gutter->row, gutter->end, INK_STRONG, text);
        return;
    }
    unit_shown(lane->trace->unit, unit);
    int at = canvas_text(canvas, row, 2, end, INK_STRONG, text);
    /* Where all goes into one row, a difference needs the unit's place. */
    if (tall || !second)
        at = canvas_text(canvas, row, at + 1, end, INK_DIM, unit);
    int next_row = tall ? row + 1 : row, next = tall ? 2 : at + 1;
    int next_end = gutter->rows <= 3 ? gutter->low_limit : gutter->end;
    if (second) {
        range_number((double)(reading.value - reading.second), span, 1, text);
        (void)canvas_printf(canvas, next_row, next, next_end, INK_CURSOR_2, "\u0394%s", text);
    } else if (lane->trace->times_ns && !isnan(reading.value)) {
        age_text(reading.age_ns, text);
        (void)canvas_text(canvas, next_row, next, next_end, INK_DIM, text);
    }
}

/* What is special about how the lane is drawn; "" when nothing is. */
static enum ink lane_remark(const struct lane *lane, char out[VALUE_TEXT_SIZE])
{
    char filter[FILTER_TEXT_SIZE];
    display_filter_text(&lane->filter, filter);
    out[0] = '\0';
    if (lane->answer.pending)
        (void)snprintf(out, VALUE_TEXT_SIZE, "computing");
    else if (lane->answer.unfiltered)
        (void)snprintf(out, VALUE_TEXT_SIZE, "filter off at this zoom");
    else if (*filter)
        (void)snprintf(out, VALUE_TEXT_SIZE, "%s", filter);
    else if (lane->fixed)
        (void)snprintf(out, VALUE_TEXT_SIZE, "%g/div", lane->per_division);
    return lane->answer.pending || lane->answer.unfiltered ? INK_WARN : INK_DIM;
}

/* In the gutter where there is room; over the curve's corner where there is not, because a trace
 * that is filtered must say so. */
static void draw_remark(const struct review *review, struct canvas *canvas, const struct lane *lane,
                        const struct gutter *gutter)
{
    char text[VALUE_TEXT_SIZE];
    enum ink ink = lane_remark(lane, text);
    int last = gutter->row + gutter->rows - 1, width = (int)strlen(text);
    bool free = gutter->rows >= 4 ||
                (gutter->rows == 3 && review->second_ns == NS_NONE && !lane->trace->times_ns);
    if (free && 2 + width <= gutter->low_limit)
        (void)canvas_text(canvas, last, 2, gutter->low_limit, ink, text);
    else if (*text)
        (void)canvas_printf(canvas, gutter->row,
                            review->layout.gutter + review->view.cells - width - 3, -1, ink, " %s ",
                            text);
}

static void draw_gutter(const struct review *review, struct canvas *canvas, const struct lane *lane,
                        int row, int rows, double low, double high)
{
    struct gutter gutter = {row, rows, review->layout.gutter - 1, low, high, 0};
    bool focused = lane == &review->lanes[review->focus];
    char text[NUMBER_TEXT_SIZE + 1] = "=";
    if (gutter.end < 4)
        return;
    int limit = gutter.end / 2;
    /* Two rows of a narrow gutter hold name and value, and no scale. */
    if (rows == 2 && gutter.end < NARROW) {
        limit = gutter.low_limit = gutter.end;
    } else if (rows >= 2) {
        /* '=' where the gain is set by hand. */
        range_number(high, high - low, 0, text + 1);
        limit = put_right(canvas, row, gutter.end, INK_DIM, lane->fixed ? text : text + 1) - 1;
        range_number(low, high - low, 0, text);
        gutter.low_limit = put_right(canvas, row + rows - 1, gutter.end, INK_DIM, text) - 1;
    }
    if (focused)
        canvas_put(canvas, row, 0, 0x25b8, INK_STRONG);
    (void)canvas_text(canvas, row, 1, limit, focused ? INK_STRONG : INK_TEXT, lane->trace->name);
    draw_value(review, canvas, lane, &gutter);
    draw_remark(review, canvas, lane, &gutter);
}

/* ---- lines over all traces ---- */

/* Only blank cells and dots are crossed: words stay readable. */
static void draw_upright(struct review *review, struct canvas *canvas, int64_t at_ns,
                         uint32_t glyph, enum ink ink, bool over)
{
    const struct part *part = &review->layout.lanes;
    int64_t cell = view_cell_at(&review->view, at_ns);
    if (cell < 0 || cell >= review->view.cells)
        return;
    int column = review->layout.gutter + (int)cell;
    for (int row = part->row; row < part->row + part->rows; row++) {
        struct cell *there = &canvas->cells[row * canvas->columns + column];
        bool braille = (there->glyph & ~0xffu) == 0x2800;
        if (there->glyph == 0 || (over && there->glyph == MARK_LINE))
            canvas_put(canvas, row, column, glyph, ink);
        else if (over && braille)
            there->ink = (uint8_t)ink;
    }
}

static void draw_mark_lines(struct review *review, struct canvas *canvas)
{
    const struct view *view = &review->view;
    int visible = 0;
    for (size_t i = 0; i < review->mark_count; i++)
        visible += review->marks[i].onset_ns >= view->from_ns &&
                   review->marks[i].onset_ns < view->from_ns + view->span_ns;
    for (size_t i = 0; i < review->mark_count; i++) {
        const struct mark *mark = &review->marks[i];
        bool chosen = mark->id == review->chosen_id;
        /* Many marks would be a fence in front of the traces. */
        if (chosen || (visible <= view->cells / 6 && mark->state != MARK_REJECTED))
            draw_upright(review, canvas, mark->onset_ns, MARK_LINE, chosen ? INK_MARK : INK_DIM,
                         false);
    }
}

static void draw_lane(struct review *review, struct canvas *canvas, size_t nth, int row)
{
    static const enum ink inks[] = {INK_TRACE_A, INK_TRACE_B, INK_TRACE_C, INK_TRACE_D};
    size_t index = lane_shown_at(review, review->first_lane + nth);
    struct lane *lane = &review->lanes[index];
    int rows = lane_height(review, nth);
    double low, high;
    lane_refresh(review, lane);
    review->waits = review->waits || lane->answer.pending;
    lane_range(lane, &low, &high);
    struct curve curve = {.row = row,
                          .column = review->layout.gutter,
                          .rows = rows,
                          .cells = review->view.cells,
                          .low = low,
                          .high = high,
                          .ink = inks[index % 4]};
    curve_draw(canvas, &curve, lane->columns);
    draw_gutter(review, canvas, lane, row, rows, low, high);
}

void draw_lanes(struct review *review, struct canvas *canvas)
{
    const struct part *part = &review->layout.lanes;
    int row = part->row;
    review->waits = false;
    for (size_t nth = 0; nth < lanes_on_screen(review); nth++) {
        draw_lane(review, canvas, nth, row);
        row += lane_height(review, nth);
    }
    if (lanes_shown(review) == 0 && part->rows > 0)
        (void)canvas_text(
            canvas, part->row + part->rows / 2, review->layout.gutter + 2, part->columns, INK_DIM,
            review->lane_count > 0 ? "all traces are hidden: \\ shows them"
            : casefile_recording_count(review->casefile) > 0 ? "no trace can be shown"
                                                             : "no recording attached yet");
    draw_mark_lines(review, canvas);
    if (review->second_ns != NS_NONE)
        draw_upright(review, canvas, review->second_ns, SECOND_LINE, INK_CURSOR_2, true);
    draw_upright(review, canvas, review->cursor_ns, CURSOR_LINE, INK_CURSOR, true);
}
