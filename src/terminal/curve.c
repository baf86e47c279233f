/*
 * curve.c - dots, and the numbers beside them. Reads no trace.
 */
#include "terminal/curve.h"

#include <math.h>
#include <stdio.h>

enum { DOT_ROWS_PER_CELL = 4 };

double round_step(double least)
{
    double power = pow(10, floor(log10(least)));
    double part = least / power;
    return power * (part <= 1.0000001 ? 1 : part <= 2.0000001 ? 2 : part <= 5.0000001 ? 5 : 10);
}

void range_round(bool known, double from, double to, double *low, double *high)
{
    from = known ? from : 0;
    to = known ? to : 0;
    double span = to - from;
    double least = fmax(fabs(from), fabs(to)) * 1e-6;
    if (!(span > least)) {
        double half = least > 0 ? fmax(fabs(from) * 0.01, least) : 1;
        *low = from - half;
        *high = from + half;
        return;
    }
    double step = round_step(span / 8);
    *low = floor((from - 0.05 * span) / step) * step;
    *high = ceil((to + 0.05 * span) / step) * step;
}

void range_number(double value, double span, int more, char out[NUMBER_TEXT_SIZE])
{
    int digits = span > 0 ? 1 - (int)floor(log10(span)) + more : 2;
    digits = digits < 0 ? 0 : digits > 6 ? 6 : digits;
    if (fabs(value) < 0.5 * pow(10, -digits))
        value = 0; /* never "-0.00" */
    if (isnan(value))
        (void)snprintf(out, NUMBER_TEXT_SIZE, "--");
    else if (fabs(value) >= 1e7)
        (void)snprintf(out, NUMBER_TEXT_SIZE, "%.2e", value);
    else
        (void)snprintf(out, NUMBER_TEXT_SIZE, "%.*f", digits, value);
}

void unit_shown(const char *unit, char out[NUMBER_TEXT_SIZE])
{
    size_t at = 0;
    for (; *unit && at + 1 < NUMBER_TEXT_SIZE; unit++) {
        if (*unit != '[' && *unit != ']')
            out[at++] = *unit;
    }
    out[at] = '\0';
}

/* Braille dots of a cell by row from the top, left and right (Unicode 8-dot patterns). */
static const uint8_t dot_bits[DOTS_PER_CELL][DOT_ROWS_PER_CELL] = {{0x01, 0x02, 0x04, 0x40},
                                                                   {0x08, 0x10, 0x20, 0x80}};

struct scale {
    double high, dots_per_unit;
    int dot_rows;
};

static int dot_row(const struct scale *scale, float value)
{
    double row = floor((scale->high - (double)value) * scale->dots_per_unit);
    return row < 0 ? 0 : row >= scale->dot_rows ? scale->dot_rows - 1 : (int)row;
}

/* One column of cells: the bits of both its columns of dots. */
static void draw_cell_column(struct canvas *canvas, const struct column *columns,
                             const struct scale *scale, int row, int column, enum ink ink)
{
    for (int side = 0; side < DOTS_PER_CELL; side++) {
        if (columns[side].kind != COLUMN_DATA)
            continue;
        int top = dot_row(scale, columns[side].high), bottom = dot_row(scale, columns[side].low);
        for (int dot = top; dot <= bottom; dot++) {
            int at = row + dot / DOT_ROWS_PER_CELL;
            struct cell *cell = &canvas->cells[at * canvas->columns + column];
            uint32_t before = cell->glyph ? cell->glyph : 0x2800;
            cell->glyph = before | dot_bits[side][dot % DOT_ROWS_PER_CELL];
            cell->ink = (uint8_t)ink;
        }
    }
}

void curve_draw(struct canvas *canvas, const struct curve *curve, const struct column *columns)
{
    int dot_rows = curve->rows * DOT_ROWS_PER_CELL;
    struct scale scale = {curve->high, dot_rows / (curve->high - curve->low), dot_rows};
    int middle = curve->row + curve->rows / 2, end = curve->column + curve->cells;
    bool any = false;
    for (int cell = 0; cell < curve->cells; cell++) {
        const struct column *two = &columns[cell * DOTS_PER_CELL];
        if (two[0].kind == COLUMN_PENDING || two[1].kind == COLUMN_PENDING)
            canvas_put(canvas, middle, curve->column + cell, 0x2591, INK_DIM);
        else
            draw_cell_column(canvas, two, &scale, curve->row, curve->column + cell, curve->ink);
        any = any || two[0].kind != COLUMN_NOTHING || two[1].kind != COLUMN_NOTHING;
    }
    if (!any)
        (void)canvas_text(canvas, middle, curve->column + 2, end, INK_DIM, "nothing recorded here");
}
