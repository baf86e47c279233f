/*
 * draw_live_help.c - the panel of keys: the tool's, then the codebook's with what they stand for.
 */
#include <stdio.h>

#include "base/str.h"
#include "terminal/live_impl.h"

enum { KEY_COLUMNS = 10, ENTRY_COLUMNS = 80 };

static const struct {
    const char *key, *text;
} tool_keys[] = {
    {"letter", "stamps its event at once; a span's key opens it, then closes it"},
    {"12 letter", "the same, 12 seconds ago"},
    {"Enter", "a note, stamped now; in the open line: keeps what is typed"},
    {"Esc", "leaves the open line for later; forgets digits"},
    {"Tab", "in the open line: letters are events again, what was typed is kept"},
    {".", "opens the line of the newest mark that lacks something"},
    {"Backspace", "takes the last mark back; again: the one before"},
    {"=", "puts back what was taken back last"},
    {"^T", "clock sync: a sync mark, and this laptop's clock to the millisecond"},
    {"^D", "device clock: stamps now, then type what the device's screen showed"},
    {"+ -", "less, more time on the traces"},
    {"Left Right", "traces back and forth; End follows again"},
    {"Up Down", "other traces"},
    {"^L", "paints the screen again"},
    {"^Z", "stops the program; `fg` goes on (streams wait)"},
    {"^Q", "leaves"},
};

bool live_tool_key(size_t index, const char **key, const char **text)
{
    if (index >= sizeof tool_keys / sizeof *tool_keys)
        return false;
    *key = tool_keys[index].key;
    *text = tool_keys[index].text;
    return true;
}

void live_draw_help(const struct live *live, struct canvas *canvas)
{
    size_t tools = sizeof tool_keys / sizeof *tool_keys;
    size_t count = tools + codebook_count(live->codebook);
    int rows = canvas->rows > 2 ? canvas->rows - 2 : 1;
    int across = canvas->columns / ENTRY_COLUMNS > 0 ? canvas->columns / ENTRY_COLUMNS : 1;
    int wide = canvas->columns / across;
    size_t page_size = (size_t)(rows * across), pages = (count + page_size - 1) / page_size;
    size_t page = (size_t)live->help_page % pages;
    canvas_fill(canvas, 0, 0, 1, canvas->columns, ' ', INK_BAR);
    (void)canvas_printf(canvas, 0, 1, canvas->columns, INK_BAR,
                        "keys   page %zu of %zu   Space next page   any other key goes on",
                        page + 1, pages);
    for (size_t i = page * page_size; i < count && i < (page + 1) * page_size; i++) {
        int place = (int)(i - page * page_size), row = 1 + place % rows;
        int column = 1 + place / rows * wide, end = column + wide - 1;
        if (i < tools) {
            (void)canvas_text(canvas, row, column, end, INK_MARK, tool_keys[i].key);
            (void)canvas_text(canvas, row, column + KEY_COLUMNS + 1, end, INK_TEXT,
                              tool_keys[i].text);
            continue;
        }
        const struct code *code = codebook_at(live->codebook, i - tools);
        canvas_put(canvas, row, column, code->key, code_ink(code));
        (void)canvas_printf(canvas, row, column + KEY_COLUMNS + 1, end, INK_TEXT, "%s%s%s%s%s",
                            code->label, *code->unit ? " in " : "", code->unit,
                            *code->help ? ": " : "", code->help);
    }
}
