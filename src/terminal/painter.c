/*
 * painter.c - cells that changed, as bytes.
 */
#include "terminal/painter.h"

#include <string.h>

void painter_init(struct painter *painter, enum theme_depth depth, bool ascii)
{
    *painter = (struct painter){.depth = depth, .ascii = ascii, .fresh = true};
}

void painter_fini(struct painter *painter)
{
    canvas_free(&painter->there);
}

static uint32_t visible(const struct cell *cell)
{
    return cell->glyph ? cell->glyph : ' ';
}

static bool same(const struct cell *a, const struct cell *b)
{
    return visible(a) == visible(b) && cell_looks_same(a, b);
}

/* A plain character that comes near: how many dots a braille cell has, which way a line goes. */
static char plain(uint32_t glyph)
{
    static const char by_dots[] = " .:-=+*##";
    if (glyph < 0x7f)
        return (char)glyph;
    if (glyph >= 0x2800 && glyph < 0x2900)
        return by_dots[__builtin_popcount(glyph & 0xff)];
    switch (glyph) {
    case 0x2500:
    case 0x2501:
    case 0x2505:
        return '-';
    case 0x2502:
    case 0x2506:
    case 0x250a:
    case 0x2575:
    case 0x252b:
        return '|';
    case 0x25b2:
    case 0x25b3:
        return '^';
    case 0x25b8:
        return '>';
    case 0x2713:
        return '!';
    case 0x00d7:
        return 'x';
    case 0x2026:
        return '~';
    case 0x2580: /* halves, of large digits */
        return '"';
    case 0x2584:
        return '_';
    default:
        return glyph >= 0x2581 && glyph <= 0x2591 ? '#' : '?';
    }
}

static void put_glyph(const struct painter *painter, const struct cell *cell, struct str *out)
{
    char bytes[4];
    if (painter->ascii)
        str_putc(out, plain(visible(cell)));
    else
        str_put_n(out, bytes, utf8_put(bytes, visible(cell)));
}

/* Paints the changed cells of a row. `pen` is how the terminal draws now; NULL = not known. */
static const struct cell *paint_row(const struct painter *painter, const struct canvas *canvas,
                                    int row, const struct cell *pen, struct str *out)
{
    const struct cell *cells = canvas->cells + (size_t)row * (size_t)canvas->columns;
    const struct cell *there = painter->there.cells + (size_t)row * (size_t)canvas->columns;
    int at = -1; /* column where the terminal's cursor is; -1 = elsewhere */
    for (int column = 0; column < canvas->columns; column++) {
        if (!painter->fresh && same(&cells[column], &there[column]))
            continue;
        if (at != column)
            str_putf(out, "\033[%d;%dH", row + 1, column + 1);
        if (!pen || !cell_looks_same(pen, &cells[column]))
            theme_sgr(painter->depth, &cells[column], out);
        pen = &cells[column];
        put_glyph(painter, pen, out);
        /* After the last column terminals differ in where the cursor is. */
        at = column + 1 < canvas->columns ? column + 1 : -1;
    }
    return pen;
}

int painter_paint(struct painter *painter, const struct canvas *canvas, struct str *out,
                  struct err *err)
{
    const struct cell *pen = NULL;
    if (painter->there.rows != canvas->rows || painter->there.columns != canvas->columns) {
        int failed = canvas_resize(&painter->there, canvas->rows, canvas->columns, err);
        if (failed)
            return failed;
        painter->fresh = true;
    }
    if (painter->fresh)
        str_put(out, "\033[0m\033[2J");
    for (int row = 0; row < canvas->rows; row++)
        pen = paint_row(painter, canvas, row, pen, out);
    memcpy(painter->there.cells, canvas->cells,
           (size_t)canvas->rows * (size_t)canvas->columns * sizeof *canvas->cells);
    /* Bytes that were lost never reach the screen: the next frame paints all of it. */
    painter->fresh = str_failed(out);
    return painter->fresh ? err_memory(err, "painting the screen") : ERR_OK;
}
