/*
 * draw_live_lists.c - what runs now, with its age and what it has given; and the last marks, with
 * whether they are saved.
 */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "terminal/live_impl.h"

/* A rule with a word in it; returns the first row below. */
static struct live_part_place draw_heading(struct canvas *canvas,
                                           const struct live_part_place *part, const char *word)
{
    struct live_part_place rest = *part;
    if (part->rows == 0)
        return rest;
    canvas_fill(canvas, part->row, part->column, 1, part->columns, 0x2500, INK_DIM);
    (void)canvas_printf(canvas, part->row, part->column + 1, part->column + part->columns, INK_DIM,
                        " %s ", word);
    rest.row++;
    rest.rows--;
    return rest;
}

/* ---- running ---- */

/* Where the next line goes, and how many there are in all. */
struct lines {
    struct canvas *canvas;
    struct live_part_place part;
    int count;
};

/* The row of the next line; -1 when there is no more room. */
static int next_row(struct lines *lines)
{
    int at = lines->count++;
    return at < lines->part.rows ? lines->part.row + at : -1;
}

static void draw_span(const struct live *live, struct lines *lines, const struct live_mark *mark)
{
    int row = next_row(lines), end = lines->part.column + lines->part.columns;
    char age[TIME_TEXT_SIZE];
    if (row < 0)
        return;
    live_age_text(live->now_ns - mark->mark.onset_ns, age);
    canvas_put(lines->canvas, row, lines->part.column + 1, mark_glyph(mark->code),
               code_ink(mark->code));
    int at =
        canvas_text(lines->canvas, row, lines->part.column + 3, end, INK_TEXT, mark->code->label);
    (void)canvas_text(lines->canvas, row, at + 2, end, INK_STRONG, age);
}

static void draw_infusion(const struct live *live, struct lines *lines,
                          const struct running *running)
{
    int row = next_row(lines), end = lines->part.column + lines->part.columns;
    char age[TIME_TEXT_SIZE];
    if (row < 0)
        return;
    live_age_text(live->now_ns - running->since_ns, age);
    canvas_put(lines->canvas, row, lines->part.column + 1, running->code->key,
               code_ink(running->code));
    int at = canvas_printf(lines->canvas, row, lines->part.column + 3, end, INK_TEXT, "%s %g %s",
                           running->code->label, running->value, running->unit);
    at = canvas_text(lines->canvas, row, at + 2, end, INK_STRONG, age);
    if (!isnan(running->given))
        (void)canvas_printf(lines->canvas, row, at + 2, end, INK_DIM, "%.3g %s given",
                            running->given, running->given_unit);
}

static void draw_running(const struct live *live, struct canvas *canvas)
{
    struct lines lines = {canvas, draw_heading(canvas, &live->layout.running, "running"), 0};
    for (size_t i = 0; i < codebook_count(live->codebook); i++) {
        struct running running;
        const struct code *code = codebook_at(live->codebook, i);
        if (live_infusion(live, code, &running))
            draw_infusion(live, &lines, &running);
    }
    for (size_t i = live->mark_count; i-- > 0;) {
        if (live_is_open(&live->marks[i]))
            draw_span(live, &lines, &live->marks[i]);
    }
    int more = lines.count - lines.part.rows;
    if (more > 0 && live->layout.running.rows > 0)
        (void)canvas_printf(canvas, live->layout.running.row, live->layout.running.column + 11, -1,
                            INK_WARN, " and %d more ", more);
    else if (lines.count == 0 && lines.part.rows > 0)
        (void)canvas_text(canvas, lines.part.row, lines.part.column + 3, -1, INK_DIM, "nothing");
}

/* ---- last marks ---- */

static enum ink state_text(const struct live *live, const struct live_mark *mark, char *out,
                           size_t size)
{
    static const char *const words[] = {"saved", "saving", "NOT SAVED"};
    enum live_saved saved = live_saved(live, mark);
    bool incomplete = mark->mark.state == MARK_INCOMPLETE && !live_is_open(mark);
    (void)snprintf(out, size, "%s%s", words[saved],
                   mark->mark.state == MARK_REJECTED ? ", taken back"
                   : incomplete                      ? ", incomplete"
                   : live_is_open(mark)              ? ", open"
                                                     : "");
    return saved == LIVE_NOT_SAVED ? INK_ALARM : incomplete ? INK_WARN : INK_DIM;
}

static void draw_mark(const struct live *live, struct canvas *canvas,
                      const struct live_part_place *part, int row, const struct live_mark *mark)
{
    int end = part->column + part->columns, decimals = part->columns >= 60 ? 3 : 0;
    bool back = mark->mark.state == MARK_REJECTED;
    char clock[TIME_TEXT_SIZE], state[48], value[VALUE_TEXT_SIZE];
    enum ink ink = back ? INK_DIM : INK_TEXT;
    enum ink state_ink = state_text(live, mark, state, sizeof state);
    int right = end - 1 - (int)strlen(state);
    live_clock_text(live, mark->mark.onset_ns, decimals, clock);
    int at = canvas_text(canvas, row, part->column + 1, right, ink, clock);
    canvas_put(canvas, row, at + 1, mark_glyph(mark->code), back ? INK_DIM : code_ink(mark->code));
    at = canvas_text(canvas, row, at + 3, right - 1, ink,
                     mark->code ? mark->code->label : mark->mark.code);
    mark_value_text(&mark->mark, value);
    if (*value)
        at = canvas_text(canvas, row, at + 1, right - 1, INK_STRONG, value);
    if (mark->mark.error_ns > 0)
        at = canvas_printf(canvas, row, at + 1, right - 1, INK_DIM,
                           mark->mark.error_ns < 10 * NS_PER_S ? "\u00b1%.2g s" : "\u00b1%.0f s",
                           s_from_ns(mark->mark.error_ns));
    if (mark->mark.until_ns != NS_NONE) {
        int64_t span_ns = mark->mark.until_ns - mark->mark.onset_ns;
        if (span_ns < 10 * NS_PER_S) /* cautery is often over within one */
            (void)snprintf(clock, sizeof clock, "%.1f s", s_from_ns(span_ns));
        else
            live_age_text(span_ns, clock);
        at = canvas_printf(canvas, row, at + 1, right - 1, INK_DIM, "for %s", clock);
    }
    if (*mark->mark.note)
        (void)canvas_printf(canvas, row, at + 2, right - 1, INK_DIM, "\"%s\"", mark->mark.note);
    (void)canvas_text(canvas, row, right, end, state_ink, state);
}

/* The mark touched last before `before`; NULL when there is none. */
static const struct live_mark *touched_before(const struct live *live, int64_t before)
{
    const struct live_mark *best = NULL;
    for (size_t i = 0; i < live->mark_count; i++) {
        const struct live_mark *at = &live->marks[i];
        if (at->touched < before && (!best || at->touched > best->touched))
            best = at;
    }
    return best;
}

static void draw_last(const struct live *live, struct canvas *canvas)
{
    struct live_part_place part = draw_heading(canvas, &live->layout.last, "last");
    const struct live_mark *mark = touched_before(live, INT64_MAX);
    for (int row = 0; row < part.rows && mark; row++) {
        draw_mark(live, canvas, &part, part.row + row, mark);
        mark = touched_before(live, mark->touched);
    }
    if (live->mark_count == 0 && part.rows > 0)
        (void)canvas_text(canvas, part.row, part.column + 3, -1, INK_DIM,
                          "no marks yet: a letter stamps what happens now");
}

void live_draw_lists(const struct live *live, struct canvas *canvas)
{
    draw_running(live, canvas);
    draw_last(live, canvas);
}
