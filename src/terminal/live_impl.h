/*
 * live_impl.h - the live model's inside, shared by the files that act on it and draw it.
 */
#ifndef TERMINAL_LIVE_IMPL_H
#define TERMINAL_LIVE_IMPL_H

#include "base/arena.h"
#include "case/mark_entry.h"
#include "terminal/columns.h"
#include "terminal/curve.h"
#include "terminal/live.h"
#include "terminal/mark_look.h"
#include "terminal/prompt.h"

/* A mark, and which changes of the session made it what it is. Texts live in live->arena. */
struct live_mark {
    struct mark mark;
    const struct code *code; /* NULL: not in the codebook */
    int64_t added;           /* number of the change that added it; 0 = it was in the case */
    int64_t newest;          /* number of its newest change here; 0 = none */
    int64_t ended;          /* number of the change that ended the span; 0 = none of this session */
    int64_t taken_back;     /* number of the change that took it back; 0 = none */
    int64_t end_taken_back; /* the same of its end, which was */
    int64_t former_until_ns; /* NS_NONE = no end was taken back */
    int64_t touched;         /* order in which marks were added or changed: the list's order */
};

/* All traces of one name, over parts and recordings, drawn in one place. */
struct live_lane {
    const struct trace **traces; /* shape (trace_count) */
    size_t trace_count, trace_room;
    struct column *columns; /* shape (dots of the room) */
    bool ranged;
    double low, high; /* of the scale as drawn */
};

struct live_part_place {
    int row, column, rows, columns;
};
struct live_layout {
    struct live_part_place title, alarm, clock, timers, traces, running, last, codes, prompt, hint;
    int digit_rows; /* height of the large digits; 1 = plain text */
    int codes_mode; /* see live_codes.c */
    int gutter;
};

enum live_asking { LIVE_ASK_NOTHING, LIVE_ASK_VALUE, LIVE_ASK_NOTE, LIVE_ASK_CLOCK };

struct live {
    struct live_setup setup;
    const struct codebook *codebook;
    const struct code *note_code, *sync_code; /* first of their kind; NULL = none */
    int rows, columns;
    struct live_layout layout;
    struct arena arena;

    int64_t boottime_ns, utc_ns;    /* now */
    int64_t now_ns;                 /* the same as case time */
    int64_t wall_minus_boottime_ns; /* at the start: does somebody set the wall clock? */
    int64_t wall_stepped_ns;
    int64_t streams_kept_ns; /* when the store was last told about them */
    int64_t streams_named;   /* how many names of files it has been told */

    struct live_mark *marks; /* in order of entry */
    size_t mark_count, mark_room;
    int64_t touches;
    struct saver_status saving; /* as of the last tick */

    int64_t ago_s; /* digits typed: the next letter was that long ago; -1 = none */
    struct prompt prompt;
    enum live_asking asking;
    size_t asked;       /* index of the mark the prompt is about */
    bool asked_already; /* the implausible value was asked about: once more keeps it */
    enum ink said_ink;
    char said[300];
    int64_t said_boottime_ns;
    bool leaving, done, repaint, help_open;
    int help_page;

    struct live_lane *lanes;
    size_t lane_count, lane_room;
    size_t *seen_traces;   /* of each stream, shape (setup.stream_count) */
    struct view view;      /* of the traces */
    int64_t held_until_ns; /* right edge when scrolled back; NS_NONE = follows now */
    size_t first_lane;
    struct column_room room;
    struct column *scratch; /* shape (dots of the room) */
};

/* ---- live.c ---- */
void live_say(struct live *live, enum ink ink, const char *format, ...) PRINTF_LIKE(3, 4);
/* "14:07:44" of a case time, or from the start when the case knows no wall clock. */
void live_clock_text(const struct live *live, int64_t at_ns, int decimals,
                     char out[TIME_TEXT_SIZE]);
/* "0:12:40" */
void live_age_text(int64_t span_ns, char out[TIME_TEXT_SIZE]);

/* ---- live_marks.c ---- */
/* An event of `code`, `ago_ns` before the key's instant. */
void live_stamp(struct live *live, const struct code *code, const struct event *event,
                int64_t ago_ns);
/* Replaces the fields of a mark and has that saved. */
void live_change(struct live *live, size_t index, const struct mark *to, const char *why);
void live_take_back(struct live *live);
void live_put_back(struct live *live);
/* Marks that others changed, and ids of ours. */
void live_take_in(struct live *live);
MUST_CHECK int live_add_known(struct live *live, const struct mark *mark, struct err *err);
enum live_saved { LIVE_SAVED, LIVE_SAVING, LIVE_NOT_SAVED };
enum live_saved live_saved(const struct live *live, const struct live_mark *mark);
/* Index of the open span of a code, or of any before index `before`; mark_count when none. */
size_t live_open_span(const struct live *live, const struct code *code);
bool live_is_open(const struct live_mark *mark);

/* ---- live_entry.c ---- */
void live_ask(struct live *live, enum live_asking asking, size_t index);
/* Asks for what the mark still lacks; false when it lacks nothing that can be typed. */
bool live_ask_lacking(struct live *live, size_t index);
/* A key while the line is open; false when the key is not the line's. */
bool live_entry_key(struct live *live, const struct event *event);

/* ---- live_running.c ---- */
struct running {
    const struct code *code;
    int64_t since_ns;
    double value; /* of the rate in force */
    const char *unit;
    double given; /* amount so far, in `given_unit`; NaN when it cannot be told */
    char given_unit[UNIT_TEXT_SIZE];
};
/* The infusion of a rate code as it is now; false when none runs. */
bool live_infusion(const struct live *live, const struct code *code, struct running *out);
/* Case time of the newest mark of a code that is not taken back; NS_NONE = none. */
int64_t live_last_of(const struct live *live, const struct code *code);

/* ---- live_view.c ---- */
/* Takes in traces that streams have begun since. */
void live_find_lanes(struct live *live);
void live_refresh_lane(struct live *live, struct live_lane *lane);
void live_follow(struct live *live);
bool live_view_key(struct live *live, uint32_t key);

/* ---- live_layout.c ---- */
void live_relayout(struct live *live);

/* ---- live_codes.c: the codebook's keys ---- */
enum { CODES_MODES = 7 };
/* Draws them into a part (canvas NULL: only counts); returns the rows they take. */
int live_codes(const struct live *live, int mode, const struct live_part_place *part,
               struct canvas *canvas);

/* ---- drawing ---- */
void live_draw_lines(const struct live *live, struct canvas *canvas);
void live_draw_clock(const struct live *live, struct canvas *canvas);
void live_draw_lists(const struct live *live, struct canvas *canvas);
void live_draw_traces(struct live *live, struct canvas *canvas);
void live_draw_help(const struct live *live, struct canvas *canvas);

#endif
