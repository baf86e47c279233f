/*
 * canvas.c - the grid of cells: clipping, text, printing. Knows no terminal.
 */
#include "terminal/canvas.h"

#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "terminal/theme.h"

enum { PRINTF_MOST = 1024 };

int canvas_resize(struct canvas *canvas, int rows, int columns, struct err *err)
{
    void *cells = NULL;
    if (rows < 0 || columns < 0)
        return err_set(err, ERR_USAGE, "a canvas of %d rows and %d columns", rows, columns);
    int failed = array_new_zero(&cells, (size_t)rows * (size_t)columns, sizeof(struct cell), err);
    if (failed)
        return failed;
    free(canvas->cells);
    *canvas = (struct canvas){rows, columns, cells};
    return ERR_OK;
}

void canvas_free(struct canvas *canvas)
{
    free(canvas->cells);
    *canvas = (struct canvas){0};
}

void canvas_clear(struct canvas *canvas)
{
    if (canvas->cells)
        memset(canvas->cells, 0,
               (size_t)canvas->rows * (size_t)canvas->columns * sizeof *canvas->cells);
}

static struct cell *cell_at(const struct canvas *canvas, int row, int column)
{
    if (row < 0 || column < 0 || row >= canvas->rows || column >= canvas->columns)
        return NULL;
    return &canvas->cells[(size_t)row * (size_t)canvas->columns + (size_t)column];
}

void canvas_put(struct canvas *canvas, int row, int column, uint32_t glyph, enum ink ink)
{
    struct cell *cell = cell_at(canvas, row, column);
    if (cell)
        *cell = (struct cell){.glyph = glyph, .ink = (uint8_t)ink};
}

/* What one cell can show of a code point. */
static uint32_t shown(uint32_t code)
{
    if (code < 0x20 || (code >= 0x7f && code < 0xa0))
        return '.';
    /* Wide by Unicode's blocks rather than by the locale, so that a frame is the same anywhere. */
    bool wide = (code >= 0x1100 && code <= 0x115f) || (code >= 0x2e80 && code <= 0xa4cf) ||
                (code >= 0xac00 && code <= 0xd7a3) || (code >= 0xf900 && code <= 0xfaff) ||
                (code >= 0xfe30 && code <= 0xfe6f) || (code >= 0xff00 && code <= 0xff60) ||
                (code >= 0x1f300 && code <= 0x1faff) || code >= 0x20000;
    bool combining = (code >= 0x300 && code <= 0x36f) || code == 0x200b || code == 0x200d ||
                     (code >= 0xfe00 && code <= 0xfe0f);
    return wide || combining ? '?' : code;
}

int canvas_text(struct canvas *canvas, int row, int column, int limit, enum ink ink,
                const char *text)
{
    int end = limit < 0 || limit > canvas->columns ? canvas->columns : limit, first = column;
    while (*text) {
        if (column >= end) {
            /* Only over text of its own: what stands before belongs to someone else. */
            if (limit >= 0 && end > first)
                canvas_put(canvas, row, end - 1, 0x2026, ink);
            return end > column ? end : column;
        }
        canvas_put(canvas, row, column++, shown(utf8_next(&text)), ink);
    }
    return column;
}

int canvas_printf(struct canvas *canvas, int row, int column, int limit, enum ink ink,
                  const char *format, ...)
{
    char text[PRINTF_MOST];
    va_list args;
    va_start(args, format);
    (void)vsnprintf(text, sizeof text, format, args);
    va_end(args);
    return canvas_text(canvas, row, column, limit, ink, text);
}

void canvas_fill(struct canvas *canvas, int row, int column, int rows, int columns, uint32_t glyph,
                 enum ink ink)
{
    for (int r = row; r < row + rows; r++) {
        for (int c = column; c < column + columns; c++)
            canvas_put(canvas, r, c, glyph, ink);
    }
}

void canvas_tint(struct canvas *canvas, int row, int column, int rows, int columns, enum ink ink)
{
    for (int r = row; r < row + rows; r++) {
        for (int c = column; c < column + columns; c++) {
            struct cell *cell = cell_at(canvas, r, c);
            if (cell)
                cell->ink = (uint8_t)ink;
        }
    }
}

static bool blank(const struct cell *cell, bool ansi)
{
    return (cell->glyph == 0 || cell->glyph == ' ') &&
           (!ansi || (!cell->reverse && !cell->underline && !theme_fills((enum ink)cell->ink)));
}

static void print_row(const struct canvas *canvas, int row, bool ansi, struct str *out)
{
    int end = canvas->columns;
    struct cell before = {0};
    bool coloured = false;
    while (end > 0 && blank(cell_at(canvas, row, end - 1), ansi))
        end--;
    for (int column = 0; column < end; column++) {
        const struct cell *cell = cell_at(canvas, row, column);
        char bytes[4];
        if (ansi && (!coloured || !cell_looks_same(cell, &before)))
            theme_sgr(THEME_256, cell, out);
        coloured = ansi;
        before = *cell;
        str_put_n(out, bytes, utf8_put(bytes, cell->glyph ? cell->glyph : ' '));
    }
    if (coloured)
        str_put(out, "\033[0m");
    str_putc(out, '\n');
}

void canvas_print(const struct canvas *canvas, bool ansi, struct str *out)
{
    for (int row = 0; row < canvas->rows; row++)
        print_row(canvas, row, ansi, out);
}
