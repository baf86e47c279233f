/*
 * test_painter.c - the painter's bytes, read back by libvterm: random pairs of canvases at several
 * sizes and colour depths must leave the second one on the glass. Starts no program.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <vterm.h>

#include "terminal/painter.h"

enum { PAIRS = 12 };

struct glass {
    VTerm *vterm;
    VTermScreen *screen;
};

static uint32_t seed = 20310520;
static int failures;

static uint32_t any(uint32_t below)
{
    seed = seed * 1664525U + 1013904223U;
    return (seed >> 8) % below;
}

static void check(bool good, const char *what, int rows, int columns, int depth)
{
    printf("%s %s (%d x %d, depth %d)\n", good ? "ok" : "not ok", what, columns, rows, depth);
    failures += !good;
}

static struct glass glass_new(int rows, int columns)
{
    struct glass glass = {.vterm = vterm_new(rows, columns)};
    vterm_set_utf8(glass.vterm, 1);
    glass.screen = vterm_obtain_screen(glass.vterm);
    vterm_screen_reset(glass.screen, 1);
    return glass;
}

/* Changes about one cell in `rarity`; the last column and row are as likely as any other. */
static void scribble(struct canvas *canvas, uint32_t rarity)
{
    static const uint32_t glyphs[] = {0, ' ', 'a', '~', 0xd7, 0x2502, 0x2800, 0x28ff, 0x2588};
    for (int i = 0; i < canvas->rows * canvas->columns; i++) {
        if (any(rarity) != 0)
            continue;
        canvas->cells[i] = (struct cell){.glyph = glyphs[any(sizeof glyphs / sizeof *glyphs)],
                                         .ink = (uint8_t)any(INK_COUNT),
                                         .bold = (uint8_t)any(2),
                                         .underline = (uint8_t)any(2),
                                         .reverse = (uint8_t)any(2)};
    }
}

static bool paint(struct painter *painter, const struct canvas *canvas, struct glass *glass)
{
    struct str bytes = {0};
    int failed = painter_paint(painter, canvas, &bytes, NULL);
    if (!failed)
        (void)vterm_input_write(glass->vterm, str_text(&bytes), bytes.length);
    str_free(&bytes);
    return !failed;
}

static VTermScreenCell seen(const struct glass *glass, int row, int column)
{
    VTermScreenCell cell = {0};
    (void)vterm_screen_get_cell(glass->screen, (VTermPos){row, column}, &cell);
    return cell;
}

/* Does the glass hold the canvas's glyphs, and the attributes that every theme must keep? */
static bool holds(const struct glass *glass, const struct canvas *canvas)
{
    for (int i = 0; i < canvas->rows * canvas->columns; i++) {
        const struct cell *cell = &canvas->cells[i];
        VTermScreenCell got = seen(glass, i / canvas->columns, i % canvas->columns);
        uint32_t want = cell->glyph ? cell->glyph : ' ';
        if ((got.chars[0] ? got.chars[0] : ' ') != want ||
            (got.attrs.underline != 0) != (cell->underline != 0) || (cell->bold && !got.attrs.bold))
            return false;
    }
    return true;
}

/* Is every cell of two glasses the same, colours and all? */
static bool alike(const struct glass *a, const struct glass *b, const struct canvas *canvas)
{
    for (int i = 0; i < canvas->rows * canvas->columns; i++) {
        VTermScreenCell x = seen(a, i / canvas->columns, i % canvas->columns);
        VTermScreenCell y = seen(b, i / canvas->columns, i % canvas->columns);
        if (x.chars[0] != y.chars[0] || x.attrs.bold != y.attrs.bold ||
            x.attrs.underline != y.attrs.underline || x.attrs.reverse != y.attrs.reverse ||
            !vterm_color_is_equal(&x.fg, &y.fg) || !vterm_color_is_equal(&x.bg, &y.bg))
            return false;
    }
    return true;
}

/* A painter that only ships changes must end where one that paints everything does. */
static void changes_end_at_the_canvas(int rows, int columns, enum theme_depth depth)
{
    struct canvas canvas = {0};
    struct painter painter;
    struct glass glass = glass_new(rows, columns);
    bool good = canvas_resize(&canvas, rows, columns, NULL) == 0;
    painter_init(&painter, depth, false);
    for (int pair = 0; good && pair < PAIRS; pair++) {
        struct painter whole;
        struct glass fresh = glass_new(rows, columns);
        painter_init(&whole, depth, false);
        scribble(&canvas, pair % 2 ? 9 : 2);
        good = paint(&painter, &canvas, &glass) && paint(&whole, &canvas, &fresh) &&
               holds(&glass, &canvas) && alike(&glass, &fresh, &canvas);
        painter_fini(&whole);
        vterm_free(fresh.vterm);
    }
    check(good, "the glass shows the canvas after every change", rows, columns, depth);

    struct str bytes = {0};
    good = painter_paint(&painter, &canvas, &bytes, NULL) == 0 && bytes.length == 0;
    check(good, "an unchanged canvas costs no byte", rows, columns, depth);
    str_free(&bytes);
    painter_fini(&painter);
    canvas_free(&canvas);
    vterm_free(glass.vterm);
}

static void plain_terminals_get_plain_bytes(void)
{
    struct canvas canvas = {0};
    struct painter painter;
    struct str bytes = {0};
    bool good = canvas_resize(&canvas, 24, 80, NULL) == 0;
    painter_init(&painter, THEME_NONE, true);
    if (good)
        scribble(&canvas, 1);
    good = good && painter_paint(&painter, &canvas, &bytes, NULL) == 0;
    for (size_t i = 0; good && i < bytes.length; i++)
        good = (unsigned char)bytes.text[i] < 0x7f;
    check(good && !strstr(str_text(&bytes), "38;5"), "ASCII without colours", 24, 80, THEME_NONE);
    str_free(&bytes);
    painter_fini(&painter);
    canvas_free(&canvas);
}

int main(void)
{
    static const int sizes[][2] = {{1, 1}, {5, 20}, {24, 80}, {60, 200}};
    for (size_t i = 0; i < sizeof sizes / sizeof *sizes; i++) {
        for (enum theme_depth depth = THEME_NONE; depth <= THEME_256; depth++)
            changes_end_at_the_canvas(sizes[i][0], sizes[i][1], depth);
    }
    plain_terminals_get_plain_bytes();
    return failures ? EXIT_FAILURE : EXIT_SUCCESS;
}
