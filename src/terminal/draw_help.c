/*
 * draw_help.c - the panel of keys that work now, made from the table of actions and the codebook.
 */
#include <stdio.h>

#include "terminal/review_impl.h"

enum { ENTRY_COLUMNS = 40, KEY_COLUMNS = 7 };

/* Where the next line of help goes: down a column, then the next column, then the next page. */
struct pen {
    struct canvas *canvas;
    int rows, columns; /* lines a column, columns a page */
    int line;          /* over all pages */
    int page;          /* the page that is drawn */
    bool dry;          /* only count */
};

static void put_line(struct pen *pen, const char *key, enum ink key_ink, const char *text,
                     enum ink ink)
{
    int place = pen->line++;
    int page = place / (pen->rows * pen->columns), rest = place % (pen->rows * pen->columns);
    if (pen->dry || page != pen->page)
        return;
    int row = 1 + rest % pen->rows, column = 1 + rest / pen->rows * ENTRY_COLUMNS;
    int end = column + ENTRY_COLUMNS - 1;
    (void)canvas_text(pen->canvas, row, column, end, key_ink, key);
    (void)canvas_text(pen->canvas, row, column + KEY_COLUMNS, end, ink, text);
}

static void put_heading(struct pen *pen, const char *text)
{
    /* Never the last line of a column. */
    if (pen->line % pen->rows == pen->rows - 1)
        pen->line++;
    int place = pen->line;
    put_line(pen, "", INK_DIM, "", INK_DIM);
    int rest = place % (pen->rows * pen->columns);
    if (!pen->dry && place / (pen->rows * pen->columns) == pen->page)
        (void)canvas_text(pen->canvas, 1 + rest % pen->rows, 1 + rest / pen->rows * ENTRY_COLUMNS,
                          -1, INK_STRONG, text);
}

static unsigned what_is_there(const struct review *review)
{
    unsigned there = NEEDS_ALWAYS;
    if (review_writable(review))
        there |= NEEDS_WRITE;
    if (review->mark_count > 0)
        there |= NEEDS_MARK;
    if (review->focus < review->lane_count)
        there |= NEEDS_LANE;
    return there;
}

static void put_actions(const struct review *review, struct pen *pen)
{
    unsigned there = what_is_there(review);
    int group = -1;
    for (size_t i = 0; action_at(i); i++) {
        const struct action_entry *entry = action_at(i);
        if (entry->needs & ~there)
            continue;
        if ((int)entry->group != group)
            put_heading(pen, action_group_heading(entry->group));
        group = (int)entry->group;
        put_line(pen, entry->shown, INK_MARK, entry->help, INK_TEXT);
    }
}

static void put_codes(const struct review *review, struct pen *pen)
{
    const struct codebook *codebook = casefile_codebook(review->casefile);
    if (!review_writable(review))
        return;
    put_heading(pen, "letters drop a mark at the cursor");
    for (size_t i = 0; i < codebook_count(codebook); i++) {
        const struct code *code = codebook_at(codebook, i);
        char key[5] = "", text[120];
        key[utf8_put(key, code->key)] = '\0';
        (void)snprintf(text, sizeof text, "%s%s%s", code->label, *code->unit ? ", " : "",
                       code->unit);
        put_line(pen, key, INK_MARK, text, INK_TEXT);
    }
}

static int page_count(const struct review *review, struct pen pen)
{
    pen.dry = true;
    put_actions(review, &pen);
    put_codes(review, &pen);
    int a_page = pen.rows * pen.columns;
    return (pen.line + a_page - 1) / a_page;
}

void draw_help(const struct review *review, struct canvas *canvas)
{
    struct pen pen = {.canvas = canvas,
                      .rows = canvas->rows > 3 ? canvas->rows - 2 : 1,
                      .columns = canvas->columns / ENTRY_COLUMNS,
                      .page = 0};
    pen.columns = pen.columns > 0 ? pen.columns : 1;
    int pages = page_count(review, pen);
    pen.page = review->help_page % (pages > 0 ? pages : 1);
    canvas_clear(canvas);
    canvas_fill(canvas, 0, 0, 1, canvas->columns, ' ', INK_BAR);
    (void)canvas_printf(canvas, 0, 1, canvas->columns, INK_BAR,
                        "keys that work now   page %d of %d   Space next page   Esc back",
                        pen.page + 1, pages);
    put_actions(review, &pen);
    put_codes(review, &pen);
}
