/*
 * live.c - the live model's life: opening, sizing, keys to actions, time passing.
 */
#include "terminal/live.h"

#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "case/live_case.h"
#include "terminal/live_impl.h"

/* A wall clock that differs by more than this from the one that never steps was set. */
static const int64_t wall_step_ns = NS_PER_S;
static const int64_t said_stays_ns = 8 * NS_PER_S;
static const int64_t streams_every_ns = 2 * NS_PER_S;
enum { AGO_MOST_S = 9999 };

void live_say(struct live *live, enum ink ink, const char *format, ...)
{
    va_list args;
    va_start(args, format);
    (void)vsnprintf(live->said, sizeof live->said, format, args);
    va_end(args);
    live->said_ink = ink;
    live->said_boottime_ns = live->boottime_ns;
}

/* What was said gives its place back to what the streams say; alarms stay. */
static void forget_said(struct live *live)
{
    if (live->said_ink != INK_ALARM && live->said_boottime_ns < live->boottime_ns - said_stays_ns)
        live->said[0] = '\0';
}

void live_clock_text(const struct live *live, int64_t at_ns, int decimals, char out[TIME_TEXT_SIZE])
{
    int64_t epoch = live->setup.session->epoch_civil_ns;
    if (epoch == NS_NONE)
        ns_format_elapsed(at_ns, decimals, out);
    else
        ns_format_day(epoch + at_ns, decimals, out);
}

void live_age_text(int64_t span_ns, char out[TIME_TEXT_SIZE])
{
    int64_t seconds = span_ns > 0 ? span_ns / NS_PER_S : 0;
    (void)snprintf(out, TIME_TEXT_SIZE, "%lld:%02d:%02d", (long long)(seconds / 3600),
                   (int)(seconds / 60 % 60), (int)(seconds % 60));
}

/* ---- opening ---- */

static const struct code *first_of(const struct codebook *codebook, enum code_kind kind)
{
    for (size_t i = 0; i < codebook_count(codebook); i++) {
        if (codebook_at(codebook, i)->kind == kind)
            return codebook_at(codebook, i);
    }
    return NULL;
}

static int take_known(struct live *live, struct err *err)
{
    int failed = ERR_OK;
    for (size_t i = 0; i < live->setup.mark_count && !failed; i++)
        failed = live_add_known(live, &live->setup.marks[i], err);
    return failed;
}

int live_new(const struct live_setup *setup, struct live **out, struct err *err)
{
    struct live *made = calloc(1, sizeof *made);
    if (!made)
        return err_memory(err, "the live screen");
    made->setup = *setup;
    made->codebook = casefile_codebook(setup->casefile);
    made->note_code = first_of(made->codebook, CODE_NOTE);
    made->sync_code = first_of(made->codebook, CODE_SYNC);
    made->ago_s = -1;
    made->held_until_ns = NS_NONE;
    made->view = (struct view){0, 10 * NS_PER_S, 1};
    void *seen = NULL;
    int failed = array_new_zero(&seen, setup->stream_count, sizeof *made->seen_traces, err);
    made->seen_traces = seen;
    if (!failed)
        failed = take_known(made, err);
    if (failed) {
        live_free(made);
        return failed;
    }
    if (*setup->remark) {
        live_say(made, INK_WARN, "%s", setup->remark);
        made->said_boottime_ns = INT64_MAX; /* stays until a key */
    }
    *out = made;
    return ERR_OK;
}

void live_free(struct live *live)
{
    if (!live)
        return;
    for (size_t i = 0; i < live->lane_count; i++) {
        free((void *)live->lanes[i].traces);
        free(live->lanes[i].columns);
    }
    free(live->lanes);
    free(live->marks);
    free(live->seen_traces);
    free(live->scratch);
    column_room_free(&live->room);
    arena_free(&live->arena);
    free(live);
}

int live_resize(struct live *live, int rows, int columns, struct err *err)
{
    void *scratch = NULL;
    rows = rows > 1 ? rows : 1;
    columns = columns > 1 ? columns : 1;
    int dots = columns * DOTS_PER_CELL;
    int failed = array_new_zero(&scratch, (size_t)dots, sizeof(struct column), err);
    if (!failed)
        failed = column_room_resize(&live->room, dots, err);
    if (failed) {
        free(scratch);
        return failed;
    }
    free(live->scratch);
    live->scratch = scratch;
    for (size_t i = 0; i < live->lane_count; i++) {
        void *made = NULL;
        failed = array_new_zero(&made, (size_t)dots, sizeof(struct column), err);
        if (failed)
            return failed;
        free(live->lanes[i].columns);
        live->lanes[i].columns = made;
    }
    live->rows = rows;
    live->columns = columns;
    live_relayout(live);
    return ERR_OK;
}

/* ---- keys ---- */

static void leave(struct live *live)
{
    size_t open = 0;
    for (size_t i = 0; i < live->mark_count; i++)
        open += live_is_open(&live->marks[i]);
    bool waits = live->saving.saved < live->saving.asked;
    if (live->leaving || (open == 0 && !waits && live->setup.stream_count == 0)) {
        live->done = true;
        return;
    }
    char spans[40] = "";
    live->leaving = true;
    if (open > 0)
        (void)snprintf(spans, sizeof spans, "; %zu span%s still open", open, open == 1 ? "" : "s");
    live_say(live, INK_WARN, "^Q again leaves%s%s%s", spans,
             live->setup.stream_count > 0 ? "; recording ends" : "",
             waits ? "; changes are not in the case yet" : "");
}

static void drop_sync(struct live *live, const struct event *event, enum live_asking asking)
{
    char clock[TIME_TEXT_SIZE];
    if (!live->sync_code) {
        live_say(live, INK_WARN, "the codebook has no code of kind sync");
        return;
    }
    live_stamp(live, live->sync_code, event, 0);
    live_clock_text(live, event->boottime_ns + live->setup.session->case_minus_boottime_ns, 3,
                    clock);
    live_say(live, INK_STRONG, "sync: this laptop says %s", clock);
    if (asking != LIVE_ASK_NOTHING && live->mark_count > 0)
        live_ask(live, asking, live->mark_count - 1);
}

static void drop_note(struct live *live, const struct event *event)
{
    if (live->note_code)
        live_stamp(live, live->note_code, event, 0);
    else
        live_say(live, INK_WARN, "the codebook has no code of kind note");
}

/* The newest mark that lacks something that can be typed; else the newest, to type again. */
static void complete_last(struct live *live)
{
    for (size_t i = live->mark_count; i-- > 0;) {
        const struct live_mark *mark = &live->marks[i];
        if (mark->mark.state == MARK_INCOMPLETE && live_ask_lacking(live, i))
            return;
    }
    live_say(live, INK_DIM, "no mark lacks anything that can be typed");
}

static void digit(struct live *live, uint32_t key)
{
    int64_t ago = (live->ago_s < 0 ? 0 : live->ago_s) * 10 + (int64_t)(key - '0');
    live->ago_s = ago <= AGO_MOST_S ? ago : live->ago_s;
}

static bool tool_key(struct live *live, const struct event *event)
{
    switch (event->key) {
    case KEY_IS_CTRL('q'):
        leave(live);
        return true;
    case KEY_IS_CTRL('l'):
        live->repaint = true;
        return true;
    case KEY_IS_CTRL('t'):
        drop_sync(live, event, LIVE_ASK_NOTHING);
        return true;
    case KEY_IS_CTRL('d'):
        drop_sync(live, event, LIVE_ASK_CLOCK);
        return true;
    case KEY_IS_ENTER:
        drop_note(live, event);
        return true;
    case KEY_IS_BACKSPACE:
        live_take_back(live);
        return true;
    case '=':
        live_put_back(live);
        return true;
    case '.':
        complete_last(live);
        return true;
    case '?':
    case KEY_IS_F(1):
        live->help_open = true;
        live->help_page = 0;
        return true;
    default:
        return live_view_key(live, event->key);
    }
}

/* Esc forgets digits, and closes what is open; any other key goes on from the help panel. */
static bool put_away(struct live *live, uint32_t key)
{
    if (live->help_open && (key == ' ' || key == KEY_IS_PAGE_DOWN)) {
        live->help_page++;
        return true;
    }
    bool was = live->help_open || live->ago_s >= 0;
    if (key == KEY_IS_ESCAPE || key == '?' || key == KEY_IS_F(1)) {
        bool help = live->help_open;
        live->help_open = false;
        live->ago_s = key == KEY_IS_ESCAPE ? -1 : live->ago_s;
        live->said[0] = '\0';
        return key == KEY_IS_ESCAPE ? was : help;
    }
    live->help_open = false;
    return false;
}

static void key(struct live *live, const struct event *event)
{
    if (live_entry_key(live, event) || put_away(live, event->key))
        return;
    if (event->key != KEY_IS_CTRL('q'))
        live->leaving = false;
    live->said[0] = '\0';
    if (event->key >= '0' && event->key <= '9') {
        digit(live, event->key);
        return;
    }
    const struct code *code = codebook_by_key(live->codebook, event->key);
    int64_t ago_s = live->ago_s;
    live->ago_s = -1;
    if (code)
        live_stamp(live, code, event, ago_s > 0 ? ago_s * NS_PER_S : 0);
    else if (!tool_key(live, event) && key_is_text(event->key))
        live_say(live, INK_WARN, "no code has this key; ? shows the keys");
}

void live_event(struct live *live, const struct event *event)
{
    live_tick(live, event->boottime_ns, event->utc_ns);
    if (event->kind == EVENT_KEY)
        key(live, event);
    live->view.cells = live->view.cells > 0 ? live->view.cells : 1;
    live_relayout(live);
}

/* ---- time ---- */

static void watch_wall_clock(struct live *live)
{
    int64_t now = live->utc_ns - live->boottime_ns;
    if (live->wall_minus_boottime_ns == 0)
        live->wall_minus_boottime_ns = now;
    int64_t step = now - live->wall_minus_boottime_ns;
    int64_t change = step - live->wall_stepped_ns;
    if (change < wall_step_ns && change > -wall_step_ns)
        return;
    live->wall_stepped_ns = step;
    live_say(
        live, INK_WARN,
        "this laptop's wall clock was set by %+.0f s; marks go on by the clock that never steps",
        s_from_ns(change));
}

static int64_t names_of_files(const struct live *live)
{
    int64_t named = 0;
    for (size_t i = 0; i < live->setup.stream_count; i++) {
        struct live_status status;
        live_stream_status(live->setup.streams[i], &status);
        named += status.named;
    }
    return named;
}

/* Which files the streams write, and their clocks so far: what a next start needs after a crash. A
 * file that nobody was told about would be left lying beside the case: that is told at once. */
static void keep_streams(struct live *live)
{
    struct err err = {0};
    int64_t named = names_of_files(live);
    if (named == live->streams_named &&
        live->boottime_ns - live->streams_kept_ns < streams_every_ns)
        return;
    live->streams_kept_ns = live->boottime_ns;
    live->streams_named = named;
    for (size_t i = 0; i < live->setup.stream_count; i++) {
        if (live_case_keep(live->setup.saver, live->setup.streams[i], live->setup.sources[i], &err))
            live_say(live, INK_ALARM, "a stream cannot be noted in the case: %s", err.text);
    }
}

void live_tick(struct live *live, int64_t boottime_ns, int64_t utc_ns)
{
    if (live->boottime_ns == 0)
        live->said_boottime_ns = boottime_ns; /* what is said from the start counts from now */
    live->boottime_ns = boottime_ns;
    live->utc_ns = utc_ns;
    live->now_ns = boottime_ns + live->setup.session->case_minus_boottime_ns;
    forget_said(live);
    watch_wall_clock(live);
    saver_status(live->setup.saver, &live->saving);
    live_take_in(live);
    live_find_lanes(live);
    live_follow(live);
    keep_streams(live);
}

void live_draw(struct live *live, struct canvas *canvas)
{
    live_relayout(live);
    canvas_clear(canvas);
    if (live->help_open) {
        live_draw_help(live, canvas);
        return;
    }
    live_draw_lines(live, canvas);
    live_draw_clock(live, canvas);
    live_draw_traces(live, canvas);
    live_draw_lists(live, canvas);
    (void)live_codes(live, live->layout.codes_mode, &live->layout.codes, canvas);
}

bool live_done(const struct live *live)
{
    return live->done;
}

bool live_repaint(struct live *live)
{
    bool asked = live->repaint;
    live->repaint = false;
    return asked;
}

size_t live_mark_count(const struct live *live)
{
    return live->mark_count;
}

const struct mark *live_mark(const struct live *live, size_t index)
{
    return index < live->mark_count ? &live->marks[index].mark : NULL;
}

bool live_mark_saved(struct live *live, size_t index)
{
    saver_status(live->setup.saver, &live->saving);
    return index < live->mark_count && live_saved(live, &live->marks[index]) == LIVE_SAVED;
}
