/*
 * test_canvas.c - the grid of cells: clipping, text, printing. Expected cells are written by hand.
 */
#include <criterion/criterion.h>
#include <criterion/new/assert.h>
#include <string.h>

#include "terminal/canvas.h"

static struct canvas small(void)
{
    struct canvas canvas = {0};
    cr_assert(canvas_resize(&canvas, 3, 8, NULL) == 0);
    return canvas;
}

static void expect_print(const struct canvas *canvas, const char *want)
{
    struct str out = {0};
    canvas_print(canvas, false, &out);
    cr_expect(strcmp(str_text(&out), want) == 0, "got:\n%s", str_text(&out));
    str_free(&out);
}

Test(canvas, clips_whatever_falls_outside)
{
    struct canvas canvas = small();
    canvas_fill(&canvas, -5, -5, 20, 7, '#', INK_TEXT);
    canvas_put(&canvas, 3, 0, 'x', INK_TEXT);
    canvas_put(&canvas, 0, 8, 'x', INK_TEXT);
    canvas_text(&canvas, 1, -2, -1, INK_TEXT, "abcd");
    canvas_tint(&canvas, 2, 1, 9, 99, INK_ALARM);
    expect_print(&canvas, "##\ncd\n##\n");
    cr_expect(canvas.cells[16].ink == INK_TEXT && canvas.cells[17].ink == INK_ALARM);
    canvas_clear(&canvas);
    expect_print(&canvas, "\n\n\n");
    canvas_free(&canvas);
}

Test(canvas, text_is_cut_and_made_harmless)
{
    struct canvas canvas = small();
    cr_expect(canvas_text(&canvas, 0, 0, 4, INK_TEXT, "abcdef") == 4);
    cr_expect(canvas_text(&canvas, 1, 0, -1, INK_TEXT, "a\033\xe6\xbc\xa2\xc3\xa9") == 4);
    cr_expect(canvas_printf(&canvas, 2, 2, -1, INK_TEXT, "%d", 12) == 4);
    expect_print(&canvas, "abc\xe2\x80\xa6\na.?\xc3\xa9\n  12\n");
    canvas_free(&canvas);
}

Test(canvas, ansi_names_the_colours_and_resets)
{
    struct canvas canvas = {0};
    struct str out = {0};
    cr_assert(canvas_resize(&canvas, 1, 4, NULL) == 0);
    canvas_put(&canvas, 0, 0, 'x', INK_ALARM);
    canvas_print(&canvas, true, &out);
    cr_expect(strcmp(str_text(&out), "\033[0;1;38;5;231;48;5;160mx\033[0m\n") == 0);
    str_free(&out);
    cr_expect(canvas_resize(&canvas, -1, 4, NULL) == ERR_USAGE && canvas.columns == 4);
    canvas_free(&canvas);
}
