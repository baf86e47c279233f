/*
 * theme.h - what each ink looks like: with 256 colours, with 8, with none.
 *
 * Dark and calm: grey text on near-black, traces in soft colours of their own, only an alarm is
 * loud, and a cursor is a band behind what it crosses. Without colours, bars, chosen lines,
 * cursors and alarms are reversed.
 */
#ifndef TERMINAL_THEME_H
#define TERMINAL_THEME_H

#include <stdbool.h>

#include "base/str.h"
#include "terminal/canvas.h"

enum theme_depth { THEME_NONE, THEME_8, THEME_256 };

/* Appends the SGR sequence that makes the terminal draw like the cell, from any state before. */
void theme_sgr(enum theme_depth depth, const struct cell *cell, struct str *out);

/* Does the ink have a background of its own, so that a blank cell shows? */
bool theme_fills(enum ink ink);

/* Same ink and attributes. */
bool cell_looks_same(const struct cell *a, const struct cell *b);

#endif
