/*
 * draw_lines.c - the review screen's single lines: title, cursor readout, the chosen mark, and what
 * can be done now.
 */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "terminal/review_impl.h"

static void draw_bar(struct canvas *canvas, const struct part *part)
{
    canvas_fill(canvas, part->row, part->column, part->rows, part->columns, ' ', INK_BAR);
}

/* "overview 43 %" while overviews are built, what stopped them when they cannot be; "" when all
 * is there. That a finished one could not be kept on disk only costs time at the next opening. */
static void overview_text(const struct review *review, char *out, size_t size)
{
    int64_t done, total;
    struct err failure = {0};
    review_overviews(review, &done, &total, &failure);
    out[0] = '\0';
    if (failure.code)
        (void)snprintf(out, size, "overview stopped: %.60s", failure.text);
    else if (done < total)
        (void)snprintf(out, size, "overview %d %%", (int)mul_div(done, 100, total));
}

static bool clocks_unaligned(const struct review *review)
{
    size_t count = casefile_recording_count(review->casefile);
    for (size_t i = 0; count > 1 && i < count; i++) {
        if (!casefile_recording(review->casefile, i)->map.aligned)
            return true;
    }
    return false;
}

static size_t count_state(const struct review *review, enum mark_state state)
{
    size_t count = 0;
    for (size_t i = 0; i < review->mark_count; i++)
        count += review->marks[i].state == state;
    return count;
}

/* Puts a text left of column `end`; returns where it starts, less a gap. */
static int put_right(struct canvas *canvas, int row, int end, int least, enum ink ink,
                     const char *text)
{
    int width = 0;
    for (const char *at = text; *at;)
        width += utf8_next(&at) != 0;
    if (!*text || end - width < least)
        return end;
    (void)canvas_text(canvas, row, end - width, -1, ink, text);
    return end - width - 2;
}

static void draw_title_right(const struct review *review, struct canvas *canvas, int least)
{
    const struct part *part = &review->layout.title;
    int end = part->columns - 1;
    char text[80];
    if (review->unsaved_count > 0) {
        (void)snprintf(text, sizeof text, "NOT SAVED %zu", review->unsaved_count);
        end = put_right(canvas, part->row, end, least, INK_ALARM, text);
    } else {
        bool writable = review_writable(review);
        end = put_right(canvas, part->row, end, least, INK_BAR, writable ? "SAVED" : "READ-ONLY");
    }
    if (clocks_unaligned(review))
        end = put_right(canvas, part->row, end, least, INK_WARN, "clocks unaligned");
    overview_text(review, text, sizeof text);
    end = put_right(canvas, part->row, end, least, INK_BAR, text);
    if (review->store) {
        size_t incomplete = count_state(review, MARK_INCOMPLETE);
        int at = snprintf(text, sizeof text, "%zu mark%s", review->mark_count,
                          review->mark_count == 1 ? "" : "s");
        if (incomplete > 0)
            (void)snprintf(text + at, sizeof text - (size_t)at, ", %zu incomplete", incomplete);
        (void)put_right(canvas, part->row, end, least, INK_BAR, text);
    }
}

static void draw_title(const struct review *review, struct canvas *canvas)
{
    const struct part *part = &review->layout.title;
    if (part->rows == 0)
        return;
    draw_bar(canvas, part);
    int at =
        canvas_text(canvas, part->row, 1, part->columns, INK_BAR, casefile_name(review->casefile));
    for (int i = 1; i < at; i++)
        canvas->cells[part->row * canvas->columns + i].bold = 1;
    /* On a narrow screen what may be wrong comes before what the case is about. */
    if (part->columns >= 60)
        at = canvas_text(canvas, part->row, at + 2, part->columns, INK_BAR,
                         review->store ? store_header(review->store)->procedure
                                       : "recording, no case");
    draw_title_right(review, canvas, at + 2);
}

/* "350.0 ms", "12.350 s", "12 min 03 s", "2 h 05 min" */
static void span_text(int64_t span_ns, char *out, size_t size)
{
    int64_t ns = span_ns < 0 ? -span_ns : span_ns;
    if (ns < NS_PER_S)
        (void)snprintf(out, size, "%.1f ms", (double)ns / NS_PER_MS);
    else if (ns < 2 * NS_PER_MIN)
        (void)snprintf(out, size, "%.3f s", s_from_ns(ns));
    else if (ns < 2 * NS_PER_HOUR)
        (void)snprintf(out, size, "%d min %02d s", (int)(ns / NS_PER_MIN),
                       (int)(ns % NS_PER_MIN / NS_PER_S));
    else
        (void)snprintf(out, size, "%d h %02d min", (int)(ns / NS_PER_HOUR),
                       (int)(ns % NS_PER_HOUR / NS_PER_MIN));
}

/* On a screen too narrow for a gutter, the chosen trace's value is read here. */
static int draw_focus_value(const struct review *review, struct canvas *canvas, int at)
{
    const struct part *part = &review->layout.readout;
    float value;
    int64_t age;
    if (review->layout.gutter > 0 || review->focus >= review->lane_count)
        return at;
    const struct trace *trace = review->lanes[review->focus].trace;
    if (trace_value_at(trace, review->cursor_ns, &value, &age, NULL) || isnan(value))
        return at;
    return canvas_printf(canvas, part->row, at + 1, part->columns, INK_STRONG, "%.4g %s",
                         (double)value, trace->unit);
}

static void draw_readout(const struct review *review, struct canvas *canvas)
{
    const struct part *part = &review->layout.readout;
    char clock[TIME_TEXT_SIZE], elapsed[TIME_TEXT_SIZE], text[60];
    int row = part->row, end = part->columns;
    /* Close enough to see single samples: microseconds. */
    int decimals = review->view.span_ns < NS_PER_S / 4 ? 6 : 3;
    review_clock_text(review, review->cursor_ns, decimals, clock);
    ns_format_elapsed(review->cursor_ns, decimals, elapsed);
    int at = canvas_text(canvas, row, 1, end, INK_CURSOR, clock);
    at = draw_focus_value(review, canvas, at);
    bool room = review->second_ns == NS_NONE || part->columns >= 100;
    if (strcmp(clock, elapsed) != 0 && room)
        at = canvas_text(canvas, row, at + 2, end, INK_TEXT, elapsed);
    if (review->second_ns == NS_NONE) {
        span_text(review->view.span_ns, text, sizeof text);
        (void)canvas_printf(canvas, row, at + 2, end, INK_DIM, "%s shown", text);
        return;
    }
    int64_t apart = review->cursor_ns - review->second_ns;
    review_clock_text(review, review->second_ns, decimals, clock);
    span_text(apart, text, sizeof text);
    at = canvas_printf(canvas, row, at + 2, end, INK_CURSOR_2, "second %s", clock);
    at = canvas_printf(canvas, row, at + 2, end, INK_STRONG, "difference %s%s",
                       apart < 0 ? "-" : "", text);
    if (apart != 0 && llabs(apart) < 10 * NS_PER_S)
        (void)canvas_printf(canvas, row, at + 1, end, INK_DIM, "(%.1f/min)",
                            60 / fabs(s_from_ns(apart)));
}

static void place_text(const struct review *review, size_t index, char *out, size_t size)
{
    int64_t away = review->marks[index].onset_ns - review->cursor_ns;
    char text[60];
    if (llabs(away) <= view_cell_ns(&review->view)) {
        (void)snprintf(out, size, "at the cursor");
        return;
    }
    span_text(away, text, sizeof text);
    (void)snprintf(out, size, "%s %s the cursor", text, away < 0 ? "before" : "after");
}

/* Code, value, when. Returns the column after it. */
static int draw_mark_what(const struct review *review, struct canvas *canvas, size_t index)
{
    const struct mark *mark = &review->marks[index];
    const struct code *code = review->codes[index];
    int row = review->layout.mark.row, end = review->layout.mark.columns;
    char value[VALUE_TEXT_SIZE], text[TIME_TEXT_SIZE];
    canvas_put(canvas, row, 1, mark_glyph(code), mark_ink(code, mark));
    int at = canvas_text(canvas, row, 3, end, INK_STRONG, mark_label(review, index));
    mark_value_text(mark, value);
    if (*value)
        at = canvas_text(canvas, row, at + 1, end, INK_STRONG, value);
    review_clock_text(review, mark->onset_ns, 3, text);
    at = canvas_text(canvas, row, at + 2, end, INK_TEXT, text);
    if (mark->until_ns != NS_NONE) {
        review_clock_text(review, mark->until_ns, 3, text);
        at = canvas_printf(canvas, row, at + 1, end, INK_TEXT, "to %s", text);
    } else if (code && code->kind == CODE_SPAN) {
        at = canvas_text(canvas, row, at + 1, end, INK_WARN, "still open");
    }
    if (mark->error_ns > 0)
        at = canvas_printf(canvas, row, at + 1, end, INK_DIM,
                           mark->error_ns < 10 * NS_PER_S ? "\u00b1%.2g s" : "\u00b1%.0f s",
                           s_from_ns(mark->error_ns));
    return at;
}

static void draw_mark(const struct review *review, struct canvas *canvas)
{
    const struct part *part = &review->layout.mark;
    size_t index = review_chosen_index(review);
    int row = part->row, end = part->columns;
    if (part->rows == 0)
        return;
    if (index == review->mark_count) {
        (void)canvas_text(canvas, row, 1, end, INK_DIM, "no marks yet");
        return;
    }
    const struct mark *mark = &review->marks[index];
    enum ink ink = mark->state == MARK_INCOMPLETE ? INK_WARN : INK_TEXT;
    char place[80], elapsed[TIME_TEXT_SIZE];
    int at = draw_mark_what(review, canvas, index);
    at = canvas_text(canvas, row, at + 2, end, ink, mark_state_name(mark->state));
    place_text(review, index, place, sizeof place);
    at = canvas_text(canvas, row, at + 2, end, INK_DIM, place);
    if (*mark->note)
        at = canvas_printf(canvas, row, at + 2, end, INK_TEXT, "\"%s\"", mark->note);
    if (mark->rater && *mark->rater)
        at = canvas_text(canvas, row, at + 2, end, INK_DIM, mark->rater);
    ns_format_elapsed(mark->onset_ns, 3, elapsed);
    if (at + 2 + (int)strlen(elapsed) < end)
        (void)canvas_text(canvas, row, at + 2, end, INK_DIM, elapsed);
}

/* Each fits into 78 columns. */
static const char *hint(const struct review *review)
{
    size_t index = review_chosen_index(review);
    if (!review_writable(review))
        return "arrows move   + - zoom   0 all   Space measure   * / gain   ? keys   ^Q leave";
    if (!review->met_keys)
        return "letters drop marks at the cursor, arrows move it, + - zoom; ? shows every key";
    if (index < review->mark_count && review->marks[index].state == MARK_INCOMPLETE)
        return "letters mark  Enter complete  Del reject  ; : nudge  [ ] step  Bksp undo  ?";
    return "letters mark  ! confirm  Del reject  ; : nudge  [ ] step  Bksp undo  ? keys";
}

static void draw_hint(const struct review *review, struct canvas *canvas)
{
    const struct part *part = &review->layout.hint;
    if (part->rows == 0)
        return;
    if (review->prompt.open) {
        prompt_draw(&review->prompt, canvas, part->row, part->column, part->columns);
    } else if (*review->said) {
        (void)canvas_text(canvas, part->row, 1, part->columns, review->said_ink, review->said);
    } else if (review->unsaved_count > 0) {
        (void)canvas_printf(canvas, part->row, 1, part->columns, INK_ALARM,
                            "NOT SAVED %zu, still trying: %s", review->unsaved_count,
                            review->unsaved_why);
    } else {
        (void)canvas_text(canvas, part->row, 1, part->columns, INK_DIM, hint(review));
    }
}

void draw_lines(const struct review *review, struct canvas *canvas)
{
    draw_title(review, canvas);
    draw_readout(review, canvas);
    draw_mark(review, canvas);
    draw_hint(review, canvas);
}
