/*
 * draw_live_clock.c - the time of day and the time since the case began, in digits that are read
 * from a metre; and how long ago things were.
 */
#include <string.h>

#include "terminal/live_impl.h"

enum { DIGIT_COLUMNS = 3, DIGIT_PIXELS = 5, LARGE = 5 };

/* Five rows of three pixels each, left pixel in the highest bit. */
static const uint8_t digits[11][DIGIT_PIXELS] = {
    {7, 5, 5, 5, 7}, {2, 6, 2, 2, 7}, {7, 1, 7, 4, 7}, {7, 1, 7, 1, 7},
    {5, 5, 7, 1, 1}, {7, 4, 7, 1, 7}, {7, 4, 7, 5, 7}, {7, 1, 1, 1, 1},
    {7, 5, 7, 5, 7}, {7, 5, 7, 1, 7}, {0, 2, 0, 2, 0},
};

static bool pixel(int glyph, int row, int column)
{
    return row < DIGIT_PIXELS && (digits[glyph][row] >> (DIGIT_COLUMNS - 1 - column) & 1);
}

/* Two pixels a cell, one above the other: upper half, lower half, or full block. */
static void draw_small(struct canvas *canvas, int row, int column, int glyph, enum ink ink)
{
    for (int y = 0; y < 3; y++) {
        for (int x = 0; x < DIGIT_COLUMNS; x++) {
            bool upper = pixel(glyph, 2 * y, x), lower = pixel(glyph, 2 * y + 1, x);
            uint32_t block = upper && lower ? 0x2588 : upper ? 0x2580 : 0x2584;
            if (upper || lower)
                canvas_put(canvas, row + y, column + x, block, ink);
        }
    }
}

/* A pixel is two cells. */
static void draw_large(struct canvas *canvas, int row, int column, int glyph, enum ink ink)
{
    for (int y = 0; y < DIGIT_PIXELS; y++) {
        for (int x = 0; x < 2 * DIGIT_COLUMNS; x++) {
            if (pixel(glyph, y, x / 2))
                canvas_put(canvas, row + y, column + x, 0x2588, ink);
        }
    }
}

/* Draws a time in digits; returns the column after it. */
static int draw_time(struct canvas *canvas, const struct live_layout *layout, int column,
                     const char *text, enum ink ink)
{
    int row = layout->clock.row;
    if (layout->digit_rows == 1)
        return canvas_text(canvas, row, column, -1, ink, text);
    bool large = layout->digit_rows == LARGE;
    for (; *text; text++) {
        int glyph = *text == ':' ? 10 : *text - '0';
        if (glyph < 0 || glyph > 10)
            continue;
        if (large)
            draw_large(canvas, row, column, glyph, ink);
        else
            draw_small(canvas, row, column, glyph, ink);
        column += (DIGIT_COLUMNS + 1) * (large ? 2 : 1);
    }
    return column;
}

static void draw_timers(const struct live *live, struct canvas *canvas)
{
    const struct live_part_place *part = &live->layout.timers;
    int64_t last = NS_NONE;
    char age[TIME_TEXT_SIZE];
    if (part->rows == 0)
        return;
    for (size_t i = 0; i < live->mark_count; i++) {
        const struct mark *mark = &live->marks[i].mark;
        if (mark->state != MARK_REJECTED && mark->onset_ns > last)
            last = mark->onset_ns;
    }
    int at = 1;
    if (last != NS_NONE) {
        live_age_text(live->now_ns - last, age);
        at = canvas_text(canvas, part->row, at, part->columns, INK_DIM, "last mark ");
        at = canvas_text(canvas, part->row, at, part->columns, INK_STRONG, age);
    }
    for (size_t i = 0; i < codebook_count(live->codebook); i++) {
        const struct code *code = codebook_at(live->codebook, i);
        int64_t when = code->timer ? live_last_of(live, code) : NS_NONE;
        if (when == NS_NONE)
            continue;
        live_age_text(live->now_ns - when, age);
        at = canvas_printf(canvas, part->row, at + 3, part->columns, INK_DIM, "%s ", code->label);
        at = canvas_text(canvas, part->row, at, part->columns, INK_STRONG, age);
    }
}

void live_draw_clock(const struct live *live, struct canvas *canvas)
{
    const struct live_layout *layout = &live->layout;
    char clock[TIME_TEXT_SIZE], elapsed[TIME_TEXT_SIZE];
    if (layout->clock.rows > 0) {
        live_clock_text(live, live->now_ns, 0, clock);
        live_age_text(live->now_ns, elapsed);
        int at = draw_time(canvas, layout, 1, clock, INK_STRONG);
        int row = layout->clock.row + layout->clock.rows - 1;
        at = canvas_text(canvas, row, at + 1, -1, INK_DIM, "case");
        (void)draw_time(canvas, layout, at + 2, elapsed, INK_TRACE_B);
    }
    draw_timers(live, canvas);
}
