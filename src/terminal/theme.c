/*
 * theme.c - inks as colours. Drug classes take the label colours of codebook/drug_class.h.
 */
#include "terminal/theme.h"

#include "codebook/drug_class.h"

enum { NO_COLOUR = -1, PAPER = 233, BLACK = 16, WHITE = 231 };

/* Numbers of the 256 and of the 8 terminal colours; NO_COLOUR = the terminal's own. */
struct look {
    int front, back;
    int basic_front, basic_back;
    bool bold;
    bool reverse_plain; /* reversed where there are no colours */
};

static const struct look looks[INK_CLASS_0] = {
    [INK_TEXT] = {252, PAPER, 7, NO_COLOUR, false, false},
    [INK_DIM] = {245, PAPER, 7, NO_COLOUR, false, false},
    [INK_STRONG] = {WHITE, PAPER, 7, NO_COLOUR, true, false},
    [INK_TRACE_A] = {114, PAPER, 2, NO_COLOUR, false, false},
    [INK_TRACE_B] = {80, PAPER, 6, NO_COLOUR, false, false},
    [INK_TRACE_C] = {186, PAPER, 3, NO_COLOUR, false, false},
    [INK_TRACE_D] = {175, PAPER, 5, NO_COLOUR, false, false},
    [INK_MARK] = {215, PAPER, 3, NO_COLOUR, true, false},
    [INK_CURSOR] = {WHITE, 239, 7, 4, true, true},
    [INK_CURSOR_2] = {117, 236, 6, 4, true, true},
    [INK_GOOD] = {108, PAPER, 2, NO_COLOUR, false, false},
    [INK_WARN] = {221, PAPER, 3, NO_COLOUR, true, false},
    [INK_ALARM] = {WHITE, 160, 7, 1, true, true},
    [INK_BAR] = {252, 237, 0, 7, false, true},
    [INK_CHOSEN] = {WHITE, 24, 7, 4, true, true},
};

/* Label colours are backgrounds, as on the syringe; the text is black or white, whichever reads. */
static struct look class_look(size_t index)
{
    const struct drug_class *class = drug_class_at(index);
    if (!class)
        return looks[INK_MARK];
    int back = class->xterm;
    /* Luminance of a colour of the 6 x 6 x 6 cube, greys apart, by its coordinates. */
    int cube = back >= 16 && back < 232 ? back - 16 : 0;
    int light = 3 * (cube / 36) + 6 * (cube / 6 % 6) + cube % 6;
    if (back >= 232)
        light = (back - 232) * 2;
    return (struct look){light > 20 ? BLACK : WHITE, back, light > 20 ? 0 : 7,
                         class->basic % 8,           true, false};
}

static struct look look_of(enum ink ink)
{
    if (ink >= INK_CLASS_0)
        return class_look((size_t)(ink - INK_CLASS_0));
    return looks[ink];
}

bool theme_fills(enum ink ink)
{
    struct look look = look_of(ink);
    return look.back != PAPER || look.reverse_plain;
}

void theme_sgr(enum theme_depth depth, const struct cell *cell, struct str *out)
{
    struct look look = look_of((enum ink)cell->ink);
    bool reverse = cell->reverse != 0;
    str_put(out, "\033[0");
    if (cell->bold || look.bold)
        str_put(out, ";1");
    if (cell->underline)
        str_put(out, ";4");
    if (depth == THEME_NONE && look.reverse_plain)
        reverse = !reverse;
    if (reverse)
        str_put(out, ";7");
    if (depth == THEME_256)
        str_putf(out, ";38;5;%d;48;5;%d", look.front, look.back);
    else if (depth == THEME_8 && look.basic_back != NO_COLOUR)
        str_putf(out, ";%d;%d", 30 + look.basic_front, 40 + look.basic_back);
    else if (depth == THEME_8)
        str_putf(out, ";%d", 30 + look.basic_front);
    str_putc(out, 'm');
}

bool cell_looks_same(const struct cell *a, const struct cell *b)
{
    return a->ink == b->ink && a->bold == b->bold && a->underline == b->underline &&
           a->reverse == b->reverse;
}
