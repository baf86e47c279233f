/*
 * review_impl.h - the review model's inside, shared by the files that act on it and draw it.
 */
#ifndef TERMINAL_REVIEW_IMPL_H
#define TERMINAL_REVIEW_IMPL_H

#include "case/mark_entry.h"
#include "terminal/columns.h"
#include "terminal/curve.h"
#include "terminal/display_filter.h"
#include "terminal/mark_look.h"
#include "terminal/prompt.h"
#include "terminal/review.h"

/* One trace on screen, and how it is shown. */
struct lane {
    const struct trace *trace;
    bool hidden;
    bool fixed;          /* gain by hand: units per division about a centre; else automatic */
    double per_division; /* a lane is LANE_DIVISIONS high */
    double centre;
    struct display_filter filter;

    struct column *columns; /* shape (dots of the room) */
    bool drawn;             /* columns hold drawn_view through drawn_filter, none pending */
    struct view drawn_view;
    struct display_filter drawn_filter;
    struct columns_answer answer;
    bool ranged; /* low and high hold the robust range of columns */
    double low, high;
};

enum { LANE_DIVISIONS = 4 };

/* Where everything is, for one size of screen. A part with 0 rows is not shown. */
struct part {
    int row, column, rows, columns;
};
struct layout {
    struct part title, strip, axis, lanes, rail, list, readout, mark, hint;
    int gutter;       /* columns left of the traces, in lanes, axis and rail */
    bool list_beside; /* else below */
};

enum nudge { NUDGE_SAMPLE, NUDGE_COLUMN, NUDGE_TENTH, NUDGE_SECOND, NUDGE_COUNT };

enum asking { ASK_NOTHING, ASK_ONSET, ASK_UNTIL, ASK_VALUE, ASK_NOTE, ASK_GO_TO };

struct review {
    struct casefile *casefile;
    struct store *store; /* NULL for a bare recording */
    int rows, columns;
    struct layout layout;

    int64_t extent_from_ns, extent_to_ns; /* never empty */
    struct view view;
    int64_t cursor_ns, second_ns; /* second: NS_NONE when away */

    struct lane *lanes; /* shape (lane_count), top to bottom */
    size_t lane_count;
    size_t focus;      /* index of the chosen lane; lane_count when none is shown */
    size_t first_lane; /* number, among lanes shown, of the topmost on screen */
    int lane_rows;     /* height by hand; 0 = automatic */
    struct column_room room;
    bool waits;            /* what was drawn last waits for an overview */
    int64_t overview_done; /* at the last tick */
    uint8_t *coverage; /* shape (coverage_cells): is anything recorded in a cell of the strip? */
    int *density;      /* shape (coverage_cells): marks in it */
    int coverage_cells;

    const struct mark *marks;  /* the store's, by onset; shape (mark_count) */
    const struct code **codes; /* of each mark; NULL = not in the codebook */
    size_t mark_count, code_room;
    int64_t chosen_id; /* 0 = none */
    enum nudge nudge;

    struct mark *unsaved; /* texts are the codebook's; shape (unsaved_count) */
    size_t unsaved_count, unsaved_room;
    char unsaved_why[200];

    struct prompt prompt;
    enum asking asking;
    int64_t asked_id; /* mark that the prompt is about */

    bool list_open, help_open;
    int help_page;
    bool met_keys; /* a key was pressed: the first hint has done its work */
    bool leaving;  /* asked to leave with marks unsaved: once more leaves */
    bool done, repaint;
    enum ink said_ink;
    char said[300]; /* what the last action has to say; "" when nothing */
};

/* ---- review.c ---- */
void review_say(struct review *review, enum ink ink, const char *format, ...) PRINTF_LIKE(3, 4);
void review_say_read_only(struct review *review);
bool review_writable(const struct review *review);
/* Fetches the marks again; says so when that fails. After every call that may change the store,
 * even one that failed: the list fetched before is no longer valid. */
void review_reload(struct review *review);
/* How far all overviews are; *failure is set when one stopped before its end. */
void review_overviews(const struct review *review, int64_t *done, int64_t *total,
                      struct err *failure);
/* Index of the chosen mark; mark_count when there is none. */
size_t review_chosen_index(const struct review *review);
const char *mark_label(const struct review *review, size_t index);
/* Time of day, or from the start when the case does not know its wall clock. */
void review_clock_text(const struct review *review, int64_t at_ns, int decimals,
                       char out[TIME_TEXT_SIZE]);

/* ---- review_layout.c ---- */
void review_relayout(struct review *review);
/* Lanes not hidden; index of the nth of them (lane_count when there is none). */
size_t lanes_shown(const struct review *review);
size_t lane_shown_at(const struct review *review, size_t nth);
/* Number of the chosen lane among those shown; scrolls so that it is on screen, and so that no
 * room is left below the last one. */
size_t lane_focus_number(const struct review *review);
void review_scroll_lanes(struct review *review);
/* Rows of the nth lane on screen (0 = topmost); how many there is room for. */
size_t lanes_on_screen(const struct review *review);
int lane_height(const struct review *review, size_t nth);

/* Index of the mark in the list's first row. */
size_t list_first(const struct review *review);

/* ---- review_time.c ---- */
bool review_time_action(struct review *review, enum action action);
/* Moves the cursor, scrolls so that it is seen, chooses the mark nearest to it. */
void review_go(struct review *review, int64_t at_ns);
void review_set_view(struct review *review, int64_t from_ns, int64_t span_ns);
/* Chooses the mark nearest to the cursor; one already chosen stays so while none is nearer. */
void review_choose_nearest(struct review *review);
/* Chooses the mark at an index and goes there. */
void review_choose(struct review *review, size_t index);

/* ---- review_lanes.c ---- */
bool review_lane_action(struct review *review, enum action action);
/* Range of values from the bottom of a lane to its top. */
void lane_range(const struct lane *lane, double *low, double *high);
/* Brings the columns up to date with the view. */
void lane_refresh(struct review *review, struct lane *lane);

/* ---- review_marks.c ---- */
bool review_mark_action(struct review *review, enum action action);
void review_retry(struct review *review);

/* ---- review_entry.c ---- */
void review_ask(struct review *review, enum asking asking, size_t index);
/* Asks for what the mark still lacks; false when it lacks nothing. */
bool review_ask_lacking(struct review *review, size_t index);
/* Enter was pressed: takes the text, or says in the prompt what is wrong with it. */
void review_take_entry(struct review *review);

/* ---- drawing, one file each ---- */
void draw_strip(struct review *review, struct canvas *canvas);
void draw_axis(const struct review *review, struct canvas *canvas);
void draw_lanes(struct review *review, struct canvas *canvas);
void draw_rail(const struct review *review, struct canvas *canvas);
void draw_list(const struct review *review, struct canvas *canvas);
void draw_lines(const struct review *review,
                struct canvas *canvas); /* title, readout, mark, hint */
void draw_help(const struct review *review, struct canvas *canvas);

#endif
