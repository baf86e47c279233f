/*
 * draw_strip.c - the strip of the whole case (how dense the marks are, what was recorded, what is
 * on screen, where the cursor is) and the time axis above the traces.
 */
#include <string.h>

#include "terminal/review_impl.h"

/* So many marks in a cell of the strip make a full block, unless another cell holds more. */
enum { FULL_HEIGHT_MARKS = 3 };

static int strip_cell(const struct review *review, int64_t at_ns)
{
    int64_t span = review->extent_to_ns - review->extent_from_ns;
    int64_t cell = mul_div(at_ns - review->extent_from_ns, review->layout.strip.columns, span);
    int64_t last = review->layout.strip.columns - 1;
    return (int)(cell < 0 ? 0 : cell > last ? last : cell);
}

static void cover(struct review *review, int64_t from_ns, int64_t to_ns)
{
    if (to_ns > from_ns)
        memset(review->coverage + strip_cell(review, from_ns), 1,
               (size_t)(strip_cell(review, to_ns - 1) - strip_cell(review, from_ns) + 1));
}

/* A cell counts as recorded when anything in it is. */
static void find_coverage(struct review *review)
{
    memset(review->coverage, 0, (size_t)review->coverage_cells);
    for (size_t i = 0; i < casefile_recording_count(review->casefile); i++) {
        const struct attached *attached = casefile_recording(review->casefile, i);
        const struct recording_info *info = attached->info;
        if (!info)
            continue;
        int64_t from = 0;
        for (size_t k = 0; k < info->gap_count; k++) {
            cover(review, clock_map_to_case(&attached->map, from),
                  clock_map_to_case(&attached->map, info->gaps[k].start_ns));
            from = info->gaps[k].start_ns + info->gaps[k].span_ns;
        }
        cover(review, clock_map_to_case(&attached->map, from),
              clock_map_to_case(&attached->map, info->span_ns));
    }
}

static int find_density(struct review *review)
{
    int most = FULL_HEIGHT_MARKS;
    memset(review->density, 0, (size_t)review->coverage_cells * sizeof *review->density);
    for (size_t i = 0; i < review->mark_count; i++) {
        if (review->marks[i].state == MARK_REJECTED)
            continue;
        int *count = &review->density[strip_cell(review, review->marks[i].onset_ns)];
        (*count)++;
        most = *count > most ? *count : most;
    }
    return most;
}

void draw_strip(struct review *review, struct canvas *canvas)
{
    const struct part *part = &review->layout.strip;
    if (part->rows < 2)
        return;
    find_coverage(review);
    int most = find_density(review);
    int from = strip_cell(review, review->view.from_ns);
    int to = strip_cell(review, review->view.from_ns + review->view.span_ns - 1);
    int cursor = strip_cell(review, review->cursor_ns);
    for (int cell = 0; cell < part->columns; cell++) {
        int level = (review->density[cell] * 8 + most - 1) / most;
        bool seen = cell >= from && cell <= to;
        if (level > 0)
            canvas_put(canvas, part->row, cell, 0x2580 + (uint32_t)level, INK_MARK);
        /* Heavy where shown, light where recorded, nothing in a gap. */
        uint32_t line = review->coverage[cell] ? (seen ? 0x2501 : 0x2500) : (seen ? 0x2505 : ' ');
        canvas_put(canvas, part->row + 1, cell, line, seen ? INK_STRONG : INK_DIM);
    }
    if (review->second_ns != NS_NONE)
        canvas_put(canvas, part->row + 1, strip_cell(review, review->second_ns), 0x25b3,
                   INK_CURSOR_2);
    canvas_put(canvas, part->row + 1, cursor, 0x25b2, INK_CURSOR);
}

/* The smallest round step of time that leaves room for a label. */
static int64_t tick_step_ns(const struct view *view, int least_cells)
{
    static const int64_t steps_ns[] = {
        NS_PER_MS / 10,  NS_PER_MS / 5,   NS_PER_MS / 2,   NS_PER_MS,        2 * NS_PER_MS,
        5 * NS_PER_MS,   10 * NS_PER_MS,  20 * NS_PER_MS,  50 * NS_PER_MS,   100 * NS_PER_MS,
        200 * NS_PER_MS, 500 * NS_PER_MS, NS_PER_S,        2 * NS_PER_S,     5 * NS_PER_S,
        10 * NS_PER_S,   20 * NS_PER_S,   30 * NS_PER_S,   NS_PER_MIN,       2 * NS_PER_MIN,
        5 * NS_PER_MIN,  10 * NS_PER_MIN, 20 * NS_PER_MIN, 30 * NS_PER_MIN,  NS_PER_HOUR,
        2 * NS_PER_HOUR, 4 * NS_PER_HOUR, 6 * NS_PER_HOUR, 12 * NS_PER_HOUR, 24 * NS_PER_HOUR,
    };
    size_t count = sizeof steps_ns / sizeof *steps_ns;
    int64_t least = mul_div(view->span_ns, least_cells, view->cells);
    for (size_t i = 0; i < count; i++) {
        if (steps_ns[i] >= least)
            return steps_ns[i];
    }
    return steps_ns[count - 1];
}

void draw_axis(const struct review *review, struct canvas *canvas)
{
    const struct part *part = &review->layout.axis;
    const struct view *view = &review->view;
    if (part->rows == 0)
        return;
    /* A label such as 14:07:44.2501 and some room after it. */
    int64_t step = tick_step_ns(view, view->span_ns < 4 * NS_PER_S ? 15 : 12);
    int decimals = step >= NS_PER_S ? 0 : step >= 100 * NS_PER_MS ? 1 : step >= NS_PER_MS ? 3 : 4;
    int64_t epoch = casefile_epoch_civil_ns(review->casefile);
    int64_t shift = epoch == NS_NONE ? 0 : epoch % step;
    int64_t tick = mul_div(view->from_ns + shift, 1, step) * step - shift;
    for (; tick < view->from_ns + view->span_ns; tick += step) {
        int64_t cell = view_cell_at(view, tick);
        char text[TIME_TEXT_SIZE];
        if (cell < 0 || cell >= view->cells)
            continue;
        review_clock_text(review, tick, decimals, text);
        int column = review->layout.gutter + (int)cell;
        canvas_put(canvas, part->row, column, 0x2575, INK_DIM);
        if (column + 1 + (int)strlen(text) <= part->columns)
            (void)canvas_text(canvas, part->row, column + 1, part->columns, INK_DIM, text);
    }
    size_t shown = lanes_shown(review), on_screen = lanes_on_screen(review);
    if (on_screen > 0 && on_screen < shown)
        (void)canvas_printf(canvas, part->row, 1, review->layout.gutter, INK_DIM, "%zu-%zu of %zu",
                            review->first_lane + 1, review->first_lane + on_screen, shown);
    else
        (void)canvas_text(canvas, part->row, 1, review->layout.gutter, INK_DIM,
                          epoch == NS_NONE ? "from start" : "time of day");
}
