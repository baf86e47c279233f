/*
 * draw_list.c - the list of marks, beside the traces or below them. The chosen mark stays in the
 * middle of it.
 */
#include "terminal/review_impl.h"

static void draw_entry(const struct review *review, struct canvas *canvas, const struct part *part,
                       int row, size_t index)
{
    const struct mark *mark = &review->marks[index];
    const struct code *code = review->codes[index];
    bool chosen = mark->id == review->chosen_id;
    int column = part->column + 1, end = part->column + part->columns;
    enum ink ink = mark_ink(code, mark), text_ink = INK_TEXT;
    if (mark->state == MARK_REJECTED)
        text_ink = INK_DIM;
    if (chosen) {
        canvas_fill(canvas, row, part->column, 1, part->columns, ' ', INK_CHOSEN);
        ink = text_ink = INK_CHOSEN;
    }
    char clock[TIME_TEXT_SIZE], value[VALUE_TEXT_SIZE];
    review_clock_text(review, mark->onset_ns, 3, clock);
    int at = canvas_text(canvas, row, column, end, text_ink, clock);
    canvas_put(canvas, row, at + 1, mark_glyph(code), ink);
    canvas_put(canvas, row, at + 2, mark_state_glyph(mark), chosen ? INK_CHOSEN : INK_WARN);
    at = canvas_text(canvas, row, at + 4, end, text_ink, mark_label(review, index));
    mark_value_text(mark, value);
    if (*value)
        at = canvas_text(canvas, row, at + 1, end, text_ink, value);
    if (mark->until_ns == NS_NONE && code && code->kind == CODE_SPAN)
        at = canvas_text(canvas, row, at + 1, end, chosen ? INK_CHOSEN : INK_WARN, "open");
    if (*mark->note)
        (void)canvas_printf(canvas, row, at + 2, end, chosen ? INK_CHOSEN : INK_DIM, "\"%s\"",
                            mark->note);
}

void draw_list(const struct review *review, struct canvas *canvas)
{
    const struct part *part = &review->layout.list;
    if (part->rows < 2)
        return;
    struct part entries = *part;
    size_t chosen = review_chosen_index(review), count = review->mark_count;
    canvas_fill(canvas, part->row, part->column, 1, part->columns, 0x2500, INK_DIM);
    if (chosen < count)
        (void)canvas_printf(canvas, part->row, part->column + 2, part->column + part->columns,
                            INK_DIM, " mark %zu of %zu ", chosen + 1, count);
    else
        (void)canvas_text(canvas, part->row, part->column + 2, part->column + part->columns,
                          INK_DIM, " no marks yet: a letter drops one ");
    entries.row++;
    entries.rows--;
    if (review->layout.list_beside) {
        canvas_fill(canvas, entries.row, entries.column, entries.rows, 1, 0x2502, INK_DIM);
        entries.column++;
        entries.columns--;
    }
    size_t room = (size_t)entries.rows;
    size_t first = list_first(review);
    for (size_t i = 0; i < room && first + i < count; i++)
        draw_entry(review, canvas, &entries, entries.row + (int)i, first + i);
}
