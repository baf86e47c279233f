/*
 * curve.h - a trace's columns as braille dots on the canvas, and the scale it is drawn to. Shared
 * by the screens; knows neither.
 */
#ifndef TERMINAL_CURVE_H
#define TERMINAL_CURVE_H

#include <stdbool.h>

#include "terminal/canvas.h"
#include "terminal/columns.h"

enum { NUMBER_TEXT_SIZE = 80 };

/* 1, 2 or 5 times a power of ten: the smallest that is not below `least`. */
double round_step(double least);

/* A range widened to round numbers, so that the scale is readable and stands still while the trace
 * scrolls by; `known` false = there is nothing to go by. */
void range_round(bool known, double from, double to, double *low, double *high);

/* A number as precise as a range of `span` deserves: "1.2" in 2 mV, "118" in 200 mm[Hg]; `more`
 * digits beyond that. */
void range_number(double value, double span, int more, char out[NUMBER_TEXT_SIZE]);

/* A unit as people read it: UCUM's brackets left out. */
void unit_shown(const char *unit, char out[NUMBER_TEXT_SIZE]);

/* Where a curve goes, and the values at its bottom and top. */
struct curve {
    int row, column, rows, cells;
    double low, high;
    enum ink ink;
};

/* Draws columns, shape (cells * DOTS_PER_CELL); says so when nothing is recorded in any of them. */
void curve_draw(struct canvas *canvas, const struct curve *curve, const struct column *columns);

#endif
