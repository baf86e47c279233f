/*
 * live_layout.c - what goes where on the live screen, for every size. Draws nothing.
 *
 * What is lost first on a small screen: the height of the digits, lists, traces, labels of the
 * codes. The state of saving, the clock and the line that is typed into stay to the last.
 */
#include "terminal/live_impl.h"

enum {
    BESIDE_FROM = 120, /* columns from which lists stand beside the traces */
    LISTS_COLUMNS = 52,
    TRACES_LEAST = 4,
    LISTS_LEAST = 4, /* a heading and a line each */
};

static bool loud(const struct live *live)
{
    if (live->saving.failing)
        return true;
    for (size_t i = 0; i < live->setup.stream_count; i++) {
        struct live_status status;
        live_stream_status(live->setup.streams[i], &status);
        if (*status.trouble)
            return true;
    }
    return false;
}

/* The richest way to show the codes that leaves room for the rest. */
static int choose_codes(struct live *live, int rows)
{
    struct live_part_place place = {0, 0, rows, live->columns};
    for (int mode = 0; mode < CODES_MODES; mode++) {
        int needed = live_codes(live, mode, &place, NULL);
        if (needed <= rows) {
            live->layout.codes_mode = mode;
            return needed;
        }
    }
    live->layout.codes_mode = CODES_MODES - 1;
    return rows > 0 ? rows : 0;
}

/* Traces and lists share what is left: side by side, or traces above lists. */
static void share(struct live *live, int row, int rows)
{
    struct live_layout *layout = &live->layout;
    bool traces = live->lane_count > 0 && rows >= TRACES_LEAST + LISTS_LEAST;
    int columns = live->columns;
    if (live->columns >= BESIDE_FROM && traces) {
        int left = columns - LISTS_COLUMNS;
        layout->traces = (struct live_part_place){row, 0, rows, left};
        layout->running = (struct live_part_place){row, left + 1, rows / 3, LISTS_COLUMNS - 1};
        layout->last =
            (struct live_part_place){row + rows / 3, left + 1, rows - rows / 3, LISTS_COLUMNS - 1};
        return;
    }
    int lists = !traces                  ? rows
                : rows / 2 > 10          ? 10
                : rows / 2 < LISTS_LEAST ? LISTS_LEAST
                                         : rows / 2;
    if (traces)
        layout->traces = (struct live_part_place){row, 0, rows - lists, columns};
    row += rows - lists;
    if (live->columns >= BESIDE_FROM) {
        layout->running = (struct live_part_place){row, 0, lists, columns / 2};
        layout->last =
            (struct live_part_place){row, columns / 2 + 1, lists, columns - columns / 2 - 1};
    } else {
        int running = lists >= 8 ? lists / 2 : lists >= 4 ? 2 + (lists - 4) / 2 : 0;
        layout->running = (struct live_part_place){row, 0, running, columns};
        layout->last = (struct live_part_place){row + running, 0, lists - running, columns};
    }
}

static int digit_rows(const struct live *live)
{
    if (live->rows >= 40 && live->columns >= 132)
        return 5;
    return live->rows >= 20 && live->columns >= 72 ? 3 : 1;
}

/* Rows of the middle that lists and traces want at least. */
static int middle_least(const struct live *live)
{
    if (live->rows < 12)
        return live->rows >= 6 ? 1 : 0;
    int lists = live->rows >= 22 ? 2 * LISTS_LEAST : 3;
    return live->lane_count > 0 && live->columns < BESIDE_FROM ? lists + TRACES_LEAST - 2 : lists;
}

void live_relayout(struct live *live)
{
    struct live_layout layout = {0};
    int rows = live->rows, columns = live->columns, row = 0, bottom = rows;
    live->layout = layout;
    live->layout.digit_rows = digit_rows(live);
    live->layout.title = (struct live_part_place){row++, 0, 1, columns};
    if (loud(live) && rows >= 4)
        live->layout.alarm = (struct live_part_place){row++, 0, 1, columns};
    if (rows >= 3)
        live->layout.prompt = (struct live_part_place){--bottom, 0, 1, columns};
    if (rows >= 10) { /* the line for hints lies below the one that is typed into */
        live->layout.hint = live->layout.prompt;
        live->layout.prompt.row = --bottom;
    }
    if (rows >= 2) {
        int height = live->layout.digit_rows;
        live->layout.clock = (struct live_part_place){row, 0, height, columns};
        row += height;
    }
    if (rows >= 12)
        live->layout.timers = (struct live_part_place){row++, 0, 1, columns};
    int codes = rows >= 9 ? choose_codes(live, bottom - row - middle_least(live)) : 0;
    bottom -= codes;
    live->layout.codes = (struct live_part_place){bottom, 0, codes, columns};
    share(live, row, bottom - row);
    live->layout.gutter = live->layout.traces.columns >= 60 ? 16 : 9;
    int cells = live->layout.traces.columns - live->layout.gutter;
    live->view.cells = cells > 1 ? cells : 1;
    live_follow(live);
}
