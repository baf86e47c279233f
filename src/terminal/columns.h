/*
 * columns.h - a stretch of a trace as the extremes of each column of dots: what a lane draws.
 *
 * Two dots lie side by side in a cell. Where a column holds few samples they are read, and the
 * line between neighbours belongs to the column too, so that a trace is one connected curve down
 * to a single sample a screen. Where it holds many, extremes come from the overview, by whole
 * blocks: a column's edge is then off by half a block at most, which is less than a dot, and no
 * sample is left out. Nothing is allocated while filling.
 */
#ifndef TERMINAL_COLUMNS_H
#define TERMINAL_COLUMNS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "base/err.h"
#include "case/casefile.h"
#include "terminal/display_filter.h"
#include "trace/trace.h"

enum { DOTS_PER_CELL = 2 };

enum column_kind {
    COLUMN_NOTHING, /* no valid sample: not recorded, or invalid */
    COLUMN_DATA,
    COLUMN_PENDING, /* the overview is not built yet */
};

struct column {
    float low, high;
    enum column_kind kind;
};

/* The stretch of case time on screen. */
struct view {
    int64_t from_ns, span_ns;
    int cells; /* columns of cells it is spread over */
};

static inline int view_dots(const struct view *view)
{
    return view->cells * DOTS_PER_CELL;
}

/* Case time of the left edge of a column of dots; dot = view_dots() is the right end. */
static inline int64_t view_dot_ns(const struct view *view, int dot)
{
    return view->from_ns + mul_div(dot, view->span_ns, view_dots(view));
}

static inline int64_t view_cell_ns(const struct view *view)
{
    return view->span_ns / (view->cells > 0 ? view->cells : 1);
}

/* Cell in which an instant lies; may be outside [0, cells). */
static inline int64_t view_cell_at(const struct view *view, int64_t at_ns)
{
    return mul_div(at_ns - view->from_ns, view->cells, view->span_ns);
}

/* Room to work in, shared by all lanes. */
struct column_room {
    float *samples; /* shape (sample_room) */
    size_t sample_room;
    double *values; /* shape (2 * dots): for sorting extremes */
    int64_t *edges; /* shape (dots + 1): first sample of each column */
    int dots;
};

MUST_CHECK int column_room_resize(struct column_room *room, int dots, struct err *err);
void column_room_free(struct column_room *room);

struct columns_answer {
    bool pending;    /* some columns wait for the overview */
    bool unfiltered; /* a filter was asked for, and the stretch is too long to filter */
};

/* Fills out, shape (view_dots(view)), of a view no wider than the room. */
struct columns_answer columns_fill(const struct casefile *casefile, const struct trace *trace,
                                   const struct display_filter *filter, const struct view *view,
                                   struct column_room *room, struct column *out);

/* Range that holds nearly all of what is visible: the 2nd percentile of lows to the 98th of
 * highs, so that a lone spike does not flatten the rest. false when no column has data. */
bool columns_range(const struct column *columns, int dots, struct column_room *room, double *low,
                   double *high);

#endif
