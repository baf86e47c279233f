/*
 * live_codes.c - the codebook's keys, always in sight: by group, drugs in their label colours. As
 * the room gets less: labels are cut, groups share lines, keys stand alone.
 */
#include <stdio.h>
#include <string.h>

#include "base/str.h"
#include "codebook/drug_class.h"
#include "terminal/live_impl.h"

enum { HEADING = 13, LABEL_GAP = 2 };

static const struct {
    int label;  /* characters of a label at most */
    bool lines; /* each group begins a line */
} modes[CODES_MODES] = {{24, true}, {16, true}, {16, false}, {11, false},
                        {8, false}, {5, false}, {0, false}};

/* Where the next word goes. */
struct codes_pen {
    const struct live_part_place *part;
    struct canvas *canvas; /* NULL: only counts */
    int row, column, indent;
};

static void new_line(struct codes_pen *pen)
{
    pen->row++;
    pen->column = pen->indent;
}

static bool visible(const struct codes_pen *pen)
{
    return pen->canvas && pen->row < pen->part->rows;
}

static int width_of(const char *text)
{
    int width = 0;
    while (utf8_next(&text))
        width++;
    return width;
}

/* "drugs" for every drug class: their colours tell them apart, and their names say the rest. */
static const char *group_of(const struct code *code)
{
    return drug_class_find(code->class_name) ? "drugs"
           : *code->class_name               ? code->class_name
                                             : "other";
}

static void put_heading(struct codes_pen *pen, const char *group, bool lines)
{
    if (lines) {
        if (pen->column > pen->indent)
            new_line(pen);
        pen->indent = HEADING;
        pen->column = 1;
    } else if (pen->column > pen->indent &&
               pen->column + width_of(group) + HEADING > pen->part->columns) {
        new_line(pen);
    }
    if (visible(pen))
        (void)canvas_text(pen->canvas, pen->part->row + pen->row, pen->part->column + pen->column,
                          pen->part->column + pen->part->columns, INK_DIM, group);
    pen->column = lines ? HEADING : pen->column + width_of(group) + 1;
}

/* The first so many characters: at five, an ellipsis would take one of the few that tell. */
static void put_label(struct codes_pen *pen, int row, int column, int length, enum ink ink,
                      const char *label)
{
    for (int i = 0; i < length; i++)
        canvas_put(pen->canvas, row, column + i, utf8_next(&label), ink);
}

static void put_code(struct codes_pen *pen, const struct live *live, const struct code *code,
                     int label_most)
{
    int label = width_of(code->label), row, column;
    label = label < label_most ? label : label_most;
    int width = 1 + (label_most > 0 ? 1 + label : 0);
    if (pen->column + width > pen->part->columns - 1)
        new_line(pen);
    row = pen->part->row + pen->row;
    column = pen->part->column + pen->column;
    if (visible(pen)) {
        bool open = live_open_span(live, code) < live->mark_count;
        enum ink ink = code_ink(code);
        canvas_put(pen->canvas, row, column, code->key, ink);
        pen->canvas->cells[row * pen->canvas->columns + column].bold = 1;
        /* A key whose span is open closes it: underlined, as well as in the list above. */
        pen->canvas->cells[row * pen->canvas->columns + column].underline = open;
        put_label(pen, row, column + 2, label, open ? INK_STRONG : INK_TEXT, code->label);
    }
    pen->column += width + (label_most > 0 ? LABEL_GAP : 1);
}

static bool group_drawn(const struct codebook *codebook, size_t before, const char *group)
{
    for (size_t i = 0; i < before; i++) {
        if (strcmp(group_of(codebook_at(codebook, i)), group) == 0)
            return true;
    }
    return false;
}

int live_codes(const struct live *live, int mode, const struct live_part_place *part,
               struct canvas *canvas)
{
    struct codes_pen pen = {.part = part, .canvas = canvas, .column = 1, .indent = 1};
    size_t count = codebook_count(live->codebook);
    for (size_t i = 0; i < count; i++) {
        const char *group = group_of(codebook_at(live->codebook, i));
        if (group_drawn(live->codebook, i, group))
            continue;
        put_heading(&pen, group, modes[mode].lines);
        for (size_t k = i; k < count; k++) {
            const struct code *code = codebook_at(live->codebook, k);
            if (strcmp(group_of(code), group) == 0)
                put_code(&pen, live, code, modes[mode].label);
        }
    }
    return count > 0 ? pen.row + 1 : 0;
}
