/*
 * draw_rail.c - marks under the traces: points as flags in their code's letter, spans as bars.
 *
 * State shows as a glyph after the letter as well as in ink: '?' incomplete, a check confirmed, a
 * cross rejected. Where the rail is full, '+' says that more marks are there than are shown.
 */
#include <string.h>

#include "terminal/review_impl.h"

/* A row of the rail in which cells [from, to] are free; -1 when there is none. */
static int free_row(const struct canvas *canvas, const struct part *part, int from, int to)
{
    for (int row = part->row; row < part->row + part->rows; row++) {
        bool taken = false;
        for (int cell = from; cell <= to && !taken; cell++)
            taken = canvas->cells[row * canvas->columns + cell].glyph != 0;
        if (!taken)
            return row;
    }
    return -1;
}

static int clamp_cell(int64_t cell, int low, int high)
{
    return (int)(cell < low ? low : cell > high ? high : cell);
}

static void draw_bar(struct canvas *canvas, int row, int from, int to, bool open, enum ink ink)
{
    for (int cell = from; cell <= to; cell++)
        canvas_put(canvas, row, cell, open ? 0x2505 : 0x2501, ink);
    canvas_put(canvas, row, to, open ? 0x25b8 : 0x252b, ink);
}

static void draw_flag(const struct review *review, struct canvas *canvas, size_t index)
{
    const struct part *part = &review->layout.rail;
    const struct mark *mark = &review->marks[index];
    const struct code *code = review->codes[index];
    int left = review->layout.gutter, right = part->columns - 1;
    bool open = mark->until_ns == NS_NONE && code && code->kind == CODE_SPAN;
    bool span = open || mark->until_ns != NS_NONE;
    int64_t onset_cell = view_cell_at(&review->view, mark->onset_ns);
    int64_t end_cell = open   ? view_cell_at(&review->view, review->extent_to_ns)
                       : span ? view_cell_at(&review->view, mark->until_ns)
                              : onset_cell;
    if (end_cell < 0 || onset_cell >= review->view.cells || part->rows == 0)
        return;
    uint32_t state = mark_state_glyph(mark);
    int from = clamp_cell(left + onset_cell, left, right);
    int to = clamp_cell(left + end_cell, from, right);
    int needed = from + (state != ' ' && from < right ? 1 : 0);
    int row = free_row(canvas, part, from, to > needed ? to : needed);
    if (row < 0) {
        canvas_put(canvas, part->row + part->rows - 1, from, '+', INK_MARK);
        return;
    }
    enum ink ink = mark_ink(code, mark);
    if (span)
        draw_bar(canvas, row, from, to, open, ink);
    if (onset_cell < 0)
        return;
    canvas_put(canvas, row, from, mark_glyph(code), ink);
    if (needed > from && state != ' ')
        canvas_put(canvas, row, from + 1, state, ink);
    if (mark->id == review->chosen_id)
        canvas->cells[row * canvas->columns + from].reverse = 1;
}

void draw_rail(const struct review *review, struct canvas *canvas)
{
    const struct part *part = &review->layout.rail;
    if (part->rows == 0 || review->layout.gutter >= part->columns)
        return;
    (void)canvas_text(canvas, part->row, 1, review->layout.gutter, INK_DIM, "marks");
    /* The chosen one first, so that it always has its place. */
    size_t chosen = review_chosen_index(review);
    if (chosen < review->mark_count)
        draw_flag(review, canvas, chosen);
    for (size_t i = 0; i < review->mark_count; i++) {
        if (i != chosen)
            draw_flag(review, canvas, i);
    }
    int64_t cursor = view_cell_at(&review->view, review->cursor_ns);
    for (int row = part->row; row < part->row + part->rows; row++) {
        int column = review->layout.gutter + (int)clamp_cell(cursor, 0, review->view.cells - 1);
        if (canvas->cells[row * canvas->columns + column].glyph == 0)
            canvas_put(canvas, row, column, 0x2502, INK_CURSOR);
    }
}
