/*
 * canvas.h - a grid of character cells: what a screen is drawn into.
 *
 * Screens are pure functions from state to canvas; a painter ships the cells that changed to the
 * terminal, `frame` prints them as text, and tests look at them. Coordinates are (row, column)
 * from the top left; whatever falls outside is clipped, so that drawing code needs no checks.
 *
 * Colours are roles, not numbers: the theme (theme.h) says what each looks like with 256 colours,
 * 16, or none, and colour never carries a meaning alone.
 */
#ifndef TERMINAL_CANVAS_H
#define TERMINAL_CANVAS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "base/err.h"
#include "base/str.h"

enum ink {
    INK_TEXT,    /* ordinary */
    INK_DIM,     /* secondary: units, grids, hints */
    INK_STRONG,  /* headings, the value being read */
    INK_TRACE_A, /* traces: neighbours get different ones */
    INK_TRACE_B,
    INK_TRACE_C,
    INK_TRACE_D,
    INK_MARK,     /* marks and their flags */
    INK_CURSOR,   /* the cursor line */
    INK_CURSOR_2, /* the second cursor line */
    INK_GOOD,     /* saved */
    INK_WARN,     /* unaligned, incomplete */
    INK_ALARM,    /* not saved, error */
    INK_BAR,      /* title and status bars (reverse in monochrome) */
    INK_CHOSEN,   /* the selected line of a list (reverse in monochrome) */
    INK_CLASS_0,  /* INK_CLASS_0 + i: drug class i's label colour (codebook/drug_class.h) */
    INK_COUNT = INK_CLASS_0 + 20
};

struct cell {
    uint32_t glyph; /* one code point of width 1; 0 = blank */
    uint8_t ink;    /* enum ink */
    uint8_t bold, underline, reverse;
};

struct canvas {
    int rows, columns;
    struct cell *cells; /* shape (rows, columns) */
};

MUST_CHECK int canvas_resize(struct canvas *canvas, int rows, int columns, struct err *err);
void canvas_free(struct canvas *canvas);
void canvas_clear(struct canvas *canvas);

void canvas_put(struct canvas *canvas, int row, int column, uint32_t glyph, enum ink ink);
/* UTF-8; returns the column after the text. Cut at `limit` columns (negative = none) with an
 * ellipsis; control characters are shown as '.', wide characters as '?'. */
int canvas_text(struct canvas *canvas, int row, int column, int limit, enum ink ink,
                const char *text);
int canvas_printf(struct canvas *canvas, int row, int column, int limit, enum ink ink,
                  const char *format, ...) PRINTF_LIKE(6, 7);
void canvas_fill(struct canvas *canvas, int row, int column, int rows, int columns, uint32_t glyph,
                 enum ink ink);
/* Changes the ink of cells, keeping their glyphs. */
void canvas_tint(struct canvas *canvas, int row, int column, int rows, int columns, enum ink ink);

/* The canvas as text: UTF-8 lines without trailing blanks; with `ansi`, SGR sequences for inks. */
void canvas_print(const struct canvas *canvas, bool ansi, struct str *out);

#endif
