/*
 * review.c - the review model's life: opening, sizing, taking in marks, ticking. What keys do is in
 * review_time.c, review_lanes.c, review_marks.c and review_entry.c.
 */
#include "terminal/review.h"

#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "terminal/review_impl.h"

static const int64_t first_width_ns = 10 * NS_PER_S;

void review_say(struct review *review, enum ink ink, const char *format, ...)
{
    va_list args;
    va_start(args, format);
    (void)vsnprintf(review->said, sizeof review->said, format, args);
    va_end(args);
    review->said_ink = ink;
}

void review_say_read_only(struct review *review)
{
    review_say(review, INK_WARN, "read-only: %s",
               review->store ? "this case cannot be changed here"
                             : "a recording alone takes no marks; `incisura start` a case");
}

bool review_writable(const struct review *review)
{
    return review->store && store_writable(review->store);
}

static void take_extent(struct review *review)
{
    casefile_extent(review->casefile, &review->extent_from_ns, &review->extent_to_ns);
    if (review->extent_to_ns <= review->extent_from_ns)
        review->extent_to_ns = review->extent_from_ns + first_width_ns;
}

static int find_codes(struct review *review, struct err *err)
{
    int failed = array_reserve((void **)&review->codes, &review->code_room, review->mark_count,
                               sizeof *review->codes, err);
    const struct codebook *codebook = casefile_codebook(review->casefile);
    for (size_t i = 0; i < review->mark_count && !failed; i++)
        review->codes[i] = codebook_find(codebook, review->marks[i].code);
    return failed;
}

static int take_marks(struct review *review, struct err *err)
{
    review->mark_count = 0;
    if (!review->store)
        return ERR_OK;
    const struct mark *marks;
    size_t count;
    int failed = store_marks(review->store, &marks, &count, err);
    if (failed)
        return failed;
    review->marks = marks;
    review->mark_count = count;
    failed = find_codes(review, err);
    if (failed)
        review->mark_count = 0;
    return failed;
}

void review_reload(struct review *review)
{
    struct err err = {0};
    if (take_marks(review, &err))
        review_say(review, INK_ALARM, "marks cannot be read: %s", err.text);
    take_extent(review);
    if (review_chosen_index(review) == review->mark_count)
        review_choose_nearest(review);
}

static int make_lanes(struct review *review, struct err *err)
{
    void *lanes = NULL;
    size_t count = casefile_channel_count(review->casefile);
    int failed = array_new_zero(&lanes, count, sizeof *review->lanes, err);
    if (failed)
        return failed;
    review->lanes = lanes;
    review->lane_count = count;
    for (size_t i = 0; i < count; i++) {
        review->lanes[i].trace = casefile_channel(review->casefile, i);
        review->lanes[i].hidden = review->lanes[i].trace->role == ROLE_STATUS;
    }
    review->focus = lane_shown_at(review, 0);
    return ERR_OK;
}

/* A recording that cannot be read leaves its traces out: that must not go unseen. */
static void say_problems(struct review *review)
{
    size_t count = casefile_recording_count(review->casefile);
    for (size_t i = 0; i < count; i++) {
        const struct attached *attached = casefile_recording(review->casefile, i);
        if (*attached->problem)
            review_say(review, INK_WARN, "recording %zu of %zu cannot be read: %.200s", i + 1,
                       count, attached->problem);
    }
}

int review_new(struct casefile *casefile, struct review **out, struct err *err)
{
    struct review *made = calloc(1, sizeof *made);
    if (!made)
        return err_memory(err, "the review screen");
    made->casefile = casefile;
    made->store = casefile_store(casefile);
    made->second_ns = NS_NONE;
    made->list_open = true;
    made->nudge = NUDGE_COLUMN;
    int failed = take_marks(made, err);
    if (!failed)
        failed = make_lanes(made, err);
    if (failed) {
        review_free(made);
        return failed;
    }
    take_extent(made);
    made->view = (struct view){made->extent_from_ns, first_width_ns, 1};
    review_go(made, made->extent_from_ns);
    say_problems(made);
    *out = made;
    return ERR_OK;
}

void review_free(struct review *review)
{
    if (!review)
        return;
    for (size_t i = 0; i < review->lane_count; i++)
        free(review->lanes[i].columns);
    free(review->lanes);
    free(review->codes);
    free(review->coverage);
    free(review->density);
    free(review->unsaved);
    column_room_free(&review->room);
    free(review);
}

/* Columns for every lane, as many dots as the widest trace area of this screen. */
static int resize_lanes(struct review *review, int dots, struct err *err)
{
    int failed = column_room_resize(&review->room, dots, err);
    for (size_t i = 0; i < review->lane_count && !failed; i++) {
        void *columns = NULL;
        failed = array_new_zero(&columns, (size_t)dots, sizeof(struct column), err);
        if (failed)
            break;
        free(review->lanes[i].columns);
        review->lanes[i].columns = columns;
        review->lanes[i].drawn = false;
    }
    return failed;
}

static int resize_strip(struct review *review, int cells, struct err *err)
{
    void *coverage = NULL, *density = NULL;
    int failed = array_new_zero(&coverage, (size_t)cells, sizeof *review->coverage, err);
    if (!failed)
        failed = array_new_zero(&density, (size_t)cells, sizeof *review->density, err);
    if (failed) {
        free(coverage);
        return failed;
    }
    free(review->coverage);
    free(review->density);
    review->coverage = coverage;
    review->density = density;
    review->coverage_cells = cells;
    return ERR_OK;
}

int review_resize(struct review *review, int rows, int columns, struct err *err)
{
    rows = rows > 1 ? rows : 1;
    columns = columns > 1 ? columns : 1;
    int failed = resize_lanes(review, columns * DOTS_PER_CELL, err);
    if (!failed)
        failed = resize_strip(review, columns, err);
    if (failed)
        return failed;
    review->rows = rows;
    review->columns = columns;
    review_relayout(review);
    review_set_view(review, review->view.from_ns, review->view.span_ns);
    return ERR_OK;
}

void review_look(struct review *review, int64_t at_ns, int64_t width_ns, bool centred)
{
    int64_t width = width_ns > 0 ? width_ns : review->view.span_ns;
    review_set_view(review, centred ? at_ns - width / 2 : at_ns, width);
    review_go(review, at_ns);
}

void review_remark(struct review *review, const char *text)
{
    review_say(review, INK_WARN, "%s", text);
}

void review_action(struct review *review, enum action action)
{
    const struct action_entry *entry = action_entry(action);
    if (!entry)
        return;
    if ((entry->needs & NEEDS_WRITE) && !review_writable(review)) {
        review_say_read_only(review);
        return;
    }
    if ((entry->needs & NEEDS_MARK) && review_chosen_index(review) == review->mark_count) {
        review_say(review, INK_WARN, "there is no mark yet; a letter of the codebook drops one");
        return;
    }
    if ((entry->needs & NEEDS_LANE) && review->focus >= review->lane_count) {
        review_say(review, INK_WARN, "no trace is shown");
        return;
    }
    if (review_time_action(review, action) || review_lane_action(review, action))
        return;
    (void)review_mark_action(review, action);
}

void review_overviews(const struct review *review, int64_t *done, int64_t *total,
                      struct err *failure)
{
    *done = *total = 0;
    for (size_t i = 0; i < casefile_recording_count(review->casefile); i++) {
        const struct attached *attached = casefile_recording(review->casefile, i);
        int64_t part = 0, whole = 0;
        struct err why = {0};
        if (!attached->overview)
            continue;
        overview_progress(attached->overview, &part, &whole, &why);
        if (why.code && part < whole)
            *failure = why;
        *done += part;
        *total += whole;
    }
}

bool review_tick(struct review *review)
{
    int64_t done, total;
    struct err failure = {0};
    review_overviews(review, &done, &total, &failure);
    /* Progress is on screen, and so is that it is over. */
    bool changed = done != review->overview_done;
    review->overview_done = done;
    if (review->unsaved_count > 0) {
        review_retry(review);
        changed = true;
    }
    if (review->store && store_refresh(review->store)) {
        review_reload(review);
        changed = true;
    }
    return changed || review->waits;
}

bool review_done(const struct review *review)
{
    return review->done;
}

bool review_repaint(struct review *review)
{
    bool asked = review->repaint;
    review->repaint = false;
    return asked;
}

int64_t review_cursor(const struct review *review)
{
    return review->cursor_ns;
}

int64_t review_chosen(const struct review *review)
{
    return review->chosen_id;
}

bool review_waits(const struct review *review)
{
    return review->waits;
}

size_t review_chosen_index(const struct review *review)
{
    for (size_t i = 0; review->chosen_id != 0 && i < review->mark_count; i++) {
        if (review->marks[i].id == review->chosen_id)
            return i;
    }
    return review->mark_count;
}

const char *mark_label(const struct review *review, size_t index)
{
    return review->codes[index] ? review->codes[index]->label : review->marks[index].code;
}

void review_clock_text(const struct review *review, int64_t at_ns, int decimals,
                       char out[TIME_TEXT_SIZE])
{
    int64_t epoch = casefile_epoch_civil_ns(review->casefile);
    if (epoch == NS_NONE)
        ns_format_elapsed(at_ns, decimals, out);
    else
        ns_format_day(epoch + at_ns, decimals, out);
}
