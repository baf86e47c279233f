/*
 * painter.h - from one canvas to the next in as few bytes as is easy: only cells that changed.
 *
 * Makes bytes for a terminal that understands ECMA-48 cursor and colour sequences (all that are
 * in use do); the session writes them in one go, so that a frame does not tear.
 */
#ifndef TERMINAL_PAINTER_H
#define TERMINAL_PAINTER_H

#include <stdbool.h>

#include "terminal/canvas.h"
#include "terminal/theme.h"

struct painter {
    enum theme_depth depth;
    bool ascii;          /* the terminal shows no UTF-8: glyphs are replaced by plain ones */
    bool fresh;          /* nothing is known of the screen: paint all of it */
    struct canvas there; /* what the terminal shows */
};

void painter_init(struct painter *painter, enum theme_depth depth, bool ascii);
void painter_fini(struct painter *painter);

/* Appends what turns the screen into `canvas`; the painter remembers it as there. */
MUST_CHECK int painter_paint(struct painter *painter, const struct canvas *canvas, struct str *out,
                             struct err *err);

#endif
