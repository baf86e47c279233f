/*
 * draw_live_traces.c - the traces of the streams, newest at the right, and marks over them.
 */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "terminal/live_impl.h"

enum { LANE_ROWS_LEAST = 2, MARK_LINE = 0x250a };

/* The newest value of any of a lane's traces. */
static float newest_value(const struct live *live, const struct live_lane *lane)
{
    float value = NAN;
    int64_t age;
    int64_t at = live->view.from_ns + live->view.span_ns - 1;
    for (size_t i = 0; i < lane->trace_count && isnan(value); i++) {
        const struct trace *trace = lane->traces[i];
        if (trace->samples == 0)
            continue;
        /* What is on its way is not missing: the last sample that has come counts. */
        int64_t last = trace_time_ns(trace, trace->samples - 1);
        int64_t place = at < last ? at : last;
        if (at - place > 2 * NS_PER_S || trace_value_at(trace, place, &value, &age, NULL))
            value = NAN;
    }
    return value;
}

static void draw_gutter(const struct live *live, struct canvas *canvas,
                        const struct live_lane *lane, int row, int rows)
{
    int column = live->layout.traces.column, end = column + live->layout.gutter - 1;
    double span = lane->high - lane->low;
    char text[NUMBER_TEXT_SIZE], unit[NUMBER_TEXT_SIZE];
    range_number((double)newest_value(live, lane), span, 0, text);
    unit_shown(lane->traces[0]->unit, unit);
    (void)canvas_text(canvas, row, column + 1, end, INK_TEXT, lane->traces[0]->name);
    if (rows >= 2) {
        int at = canvas_text(canvas, row + 1, column + 1, end, INK_STRONG, text);
        (void)canvas_text(canvas, row + 1, at + 1, end, INK_DIM, unit);
    }
    if (rows >= 4) {
        range_number(lane->high, span, 0, text);
        int at = canvas_text(canvas, row + 2, column + 1, end, INK_DIM, text);
        range_number(lane->low, span, 0, text);
        (void)canvas_printf(canvas, row + 2, at, end, INK_DIM, " to %s", text);
    }
}

static void draw_marks(const struct live *live, struct canvas *canvas)
{
    const struct live_part_place *part = &live->layout.traces;
    for (size_t i = 0; i < live->mark_count; i++) {
        const struct live_mark *mark = &live->marks[i];
        int64_t cell = view_cell_at(&live->view, mark->mark.onset_ns);
        if (mark->mark.state == MARK_REJECTED || cell < 0 || cell >= live->view.cells)
            continue;
        int column = part->column + live->layout.gutter + (int)cell;
        for (int row = part->row; row < part->row + part->rows - 1; row++) {
            if (canvas->cells[row * canvas->columns + column].glyph == 0)
                canvas_put(canvas, row, column, MARK_LINE, INK_DIM);
        }
        canvas_put(canvas, part->row + part->rows - 1, column, mark_glyph(mark->code),
                   code_ink(mark->code));
    }
}

/* The last row: how wide the view is, and whether it follows. */
static void draw_axis(const struct live *live, struct canvas *canvas)
{
    const struct live_part_place *part = &live->layout.traces;
    int row = part->row + part->rows - 1;
    if (live->held_until_ns == NS_NONE) {
        (void)canvas_printf(canvas, row, part->column + 1, part->column + live->layout.gutter,
                            INK_DIM, "%lld s", (long long)(live->view.span_ns / NS_PER_S));
        return;
    }
    char clock[TIME_TEXT_SIZE];
    live_clock_text(live, live->view.from_ns + live->view.span_ns, 0, clock);
    (void)canvas_printf(canvas, row, part->column + 1, part->column + part->columns, INK_WARN,
                        "held at %s, End follows", clock);
}

void live_draw_traces(struct live *live, struct canvas *canvas)
{
    static const enum ink inks[] = {INK_TRACE_A, INK_TRACE_B, INK_TRACE_C, INK_TRACE_D};
    const struct live_part_place *part = &live->layout.traces;
    int rows = part->rows - 1;
    if (rows < 1 || live->view.cells < 1)
        return;
    size_t room = (size_t)(rows / LANE_ROWS_LEAST > 0 ? rows / LANE_ROWS_LEAST : 1);
    size_t first = live->first_lane < live->lane_count ? live->first_lane : 0;
    size_t shown = live->lane_count - first < room ? live->lane_count - first : room;
    int row = part->row;
    for (size_t i = 0; i < shown; i++) {
        struct live_lane *lane = &live->lanes[first + i];
        int height = rows / (int)shown + ((int)i < rows % (int)shown ? 1 : 0);
        live_refresh_lane(live, lane);
        struct curve curve = {row,
                              part->column + live->layout.gutter,
                              height,
                              live->view.cells,
                              lane->low,
                              lane->high,
                              inks[(first + i) % 4]};
        if (lane->high > lane->low)
            curve_draw(canvas, &curve, lane->columns);
        draw_gutter(live, canvas, lane, row, height);
        row += height;
    }
    if (shown < live->lane_count)
        (void)canvas_printf(canvas, part->row, part->column + part->columns - 22, -1, INK_DIM,
                            " %zu of %zu, Up Down ", shown, live->lane_count);
    draw_marks(live, canvas);
    draw_axis(live, canvas);
}
