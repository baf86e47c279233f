/*
 * test_painter.c - what the painter sends, given to an independent terminal (libvterm), must make
 * the canvas, colours and all.
 */
#include <criterion/criterion.h>

#include <stdlib.h>
#include <string.h>
#include <vterm.h>

#include "terminal/painter.h"

enum { ROWS = 12, COLUMNS = 37 };

static unsigned seed = 20310520;

static unsigned random_below(unsigned limit)
{
    seed = seed * 1103515245u + 12345u;
    return (seed >> 16) % limit;
}

static void scribble(struct canvas *canvas, int cells)
{
    static const uint32_t glyphs[] = {0, ' ', 'a', 'Z', 0x2847, 0x2502, 0xb1, 0x2588, 0x2713};
    for (int i = 0; i < cells; i++) {
        int row = (int)random_below(ROWS), column = (int)random_below(COLUMNS);
        canvas_put(canvas, row, column, glyphs[random_below(9)], (enum ink)random_below(INK_COUNT));
        struct cell *cell = &canvas->cells[row * COLUMNS + column];
        cell->reverse = random_below(8) == 0;
        cell->underline = random_below(8) == 0;
        cell->bold = random_below(8) == 0;
    }
}

/* The SGR parameters that make a cell, as a terminal that starts anew would show them. */
static VTermScreenCell expected(const struct cell *cell)
{
    VTerm *fresh = vterm_new(1, 2);
    VTermScreen *glass = vterm_obtain_screen(fresh);
    struct str bytes = {0};
    VTermScreenCell out;
    vterm_set_utf8(fresh, 1);
    vterm_screen_reset(glass, 1);
    theme_sgr(THEME_256, cell, &bytes);
    str_putc(&bytes, 'x');
    (void)vterm_input_write(fresh, bytes.text, bytes.length);
    cr_assert(vterm_screen_get_cell(glass, (VTermPos){0, 0}, &out));
    str_free(&bytes);
    vterm_free(fresh);
    return out;
}

static void compare(VTermScreen *glass, const struct canvas *canvas, int round)
{
    for (int row = 0; row < ROWS; row++) {
        for (int column = 0; column < COLUMNS; column++) {
            const struct cell *cell = &canvas->cells[row * COLUMNS + column];
            VTermScreenCell there, wanted = expected(cell);
            cr_assert(vterm_screen_get_cell(glass, (VTermPos){row, column}, &there));
            uint32_t shown = there.chars[0] ? there.chars[0] : ' ';
            cr_assert_eq(shown, cell->glyph ? cell->glyph : ' ', "round %d, row %d, column %d",
                         round, row, column);
            cr_assert(vterm_color_is_equal(&there.fg, &wanted.fg) &&
                          vterm_color_is_equal(&there.bg, &wanted.bg) &&
                          there.attrs.bold == wanted.attrs.bold &&
                          there.attrs.reverse == wanted.attrs.reverse &&
                          there.attrs.underline == wanted.attrs.underline,
                      "round %d, row %d, column %d looks otherwise", round, row, column);
        }
    }
}

Test(painter, makes_any_canvas_out_of_any_other)
{
    VTerm *vterm = vterm_new(ROWS, COLUMNS);
    VTermScreen *glass = vterm_obtain_screen(vterm);
    struct painter painter;
    struct canvas canvas = {0};
    struct str bytes = {0};
    vterm_set_utf8(vterm, 1);
    vterm_screen_reset(glass, 1);
    cr_assert_eq(canvas_resize(&canvas, ROWS, COLUMNS, NULL), 0);
    painter_init(&painter, THEME_256, false);
    for (int round = 0; round < 30; round++) {
        scribble(&canvas, round % 5 == 4 ? ROWS * COLUMNS : 10);
        painter.fresh = round % 7 == 0;
        str_clear(&bytes);
        cr_assert_eq(painter_paint(&painter, &canvas, &bytes, NULL), 0);
        (void)vterm_input_write(vterm, bytes.text, bytes.length);
        compare(glass, &canvas, round);
    }
    str_clear(&bytes);
    cr_assert_eq(painter_paint(&painter, &canvas, &bytes, NULL), 0);
    cr_expect_eq(bytes.length, 0, "an unchanged frame sends nothing");
    str_free(&bytes);
    canvas_free(&canvas);
    painter_fini(&painter);
    vterm_free(vterm);
}

Test(painter, plain_terminals_get_plain_characters)
{
    struct painter painter;
    struct canvas canvas = {0};
    struct str bytes = {0};
    cr_assert_eq(canvas_resize(&canvas, 1, 8, NULL), 0);
    static const uint32_t glyphs[] = {0x28ff, 0x2801, 0x2500, 0x2502, 0x25b2, 0x2713, 0xd7, 0x2026};
    for (int i = 0; i < 8; i++)
        canvas_put(&canvas, 0, i, glyphs[i], INK_ALARM);
    painter_init(&painter, THEME_NONE, true);
    cr_assert_eq(painter_paint(&painter, &canvas, &bytes, NULL), 0);
    cr_expect(strstr(bytes.text, "#.-|^!x~"), "%s", bytes.text);
    cr_expect(strstr(bytes.text, "\033[0;1;7m"), "an alarm is loud without colours");
    cr_expect_null(strstr(bytes.text, "38;5"));
    str_free(&bytes);
    canvas_free(&canvas);
    painter_fini(&painter);
}
