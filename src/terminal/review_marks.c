/*
 * review_marks.c - dropping marks and changing the chosen one, all through the store, so that
 * everything is in the history. Also the panels that open and close, and leaving.
 */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "terminal/review_impl.h"

/* Standard uncertainty of an instant that is somewhere in a column: a uniform distribution over
 * its width (GUM 4.3.7: half-width over the square root of 3). */
static int64_t column_error_ns(const struct review *review)
{
    return (int64_t)((double)view_cell_ns(&review->view) / 2 / sqrt(3));
}

static void say_mark(struct review *review, const char *what, size_t index)
{
    char text[TIME_TEXT_SIZE];
    review_clock_text(review, review->marks[index].onset_ns, 3, text);
    review_say(review, INK_GOOD, "saved: %s %s at %s", what, mark_label(review, index), text);
}

/* Keeps a mark that the disk would not take. */
static void keep_unsaved(struct review *review, const struct mark *mark, const struct err *why)
{
    (void)snprintf(review->unsaved_why, sizeof review->unsaved_why, "%.199s", why->text);
    struct err err = {0};
    if (array_reserve((void **)&review->unsaved, &review->unsaved_room, review->unsaved_count + 1,
                      sizeof *review->unsaved, &err)) {
        review_say(review, INK_ALARM, "MARK LOST, out of memory: write it down: %s", mark->code);
        return;
    }
    review->unsaved[review->unsaved_count++] = *mark;
}

void review_retry(struct review *review)
{
    size_t saved = 0;
    struct err err = {0};
    while (saved < review->unsaved_count) {
        int64_t id;
        if (store_mark_add(review->store, &review->unsaved[saved], "saved late", &id, &err))
            break;
        saved++;
    }
    review_reload(review);
    if (saved == 0)
        return;
    review->unsaved_count -= saved;
    memmove(review->unsaved, review->unsaved + saved,
            review->unsaved_count * sizeof *review->unsaved);
    review_say(review, INK_GOOD, "saved late: %zu mark%s", saved, saved == 1 ? "" : "s");
}

int review_leave(struct review *review, struct err *err)
{
    struct str list = {0};
    if (review->unsaved_count > 0)
        review_retry(review);
    if (review->unsaved_count == 0)
        return ERR_OK;
    for (size_t i = 0; i < review->unsaved_count; i++) {
        char at[TIME_TEXT_SIZE];
        ns_format_elapsed(review->unsaved[i].onset_ns, 3, at);
        str_putf(&list, "%s%s at %s", i > 0 ? ", " : "", review->unsaved[i].code, at);
    }
    (void)err_set(err, ERR_IO, "%zu NOT SAVED (%.100s); write down: %s", review->unsaved_count,
                  review->unsaved_why, str_text(&list));
    str_free(&list);
    return ERR_IO;
}

static bool change(struct review *review, const struct mark *mark, const char *said)
{
    struct err err = {0};
    int64_t id = mark->id;
    int failed = store_mark_change(review->store, mark, "", &err);
    review_reload(review);
    review->chosen_id = id;
    if (failed) {
        review_say(review, INK_ALARM, "NOT SAVED: %s", err.text);
        return false;
    }
    size_t index = review_chosen_index(review);
    if (index < review->mark_count)
        say_mark(review, said, index);
    return true;
}

/* The latest open span of the code that began before the cursor; mark_count when none did. */
static size_t open_span(const struct review *review, const struct code *code)
{
    size_t found = review->mark_count;
    for (size_t i = 0; i < review->mark_count; i++) {
        const struct mark *mark = &review->marks[i];
        if (mark->until_ns == NS_NONE && mark->state != MARK_REJECTED &&
            mark->onset_ns <= review->cursor_ns && strcmp(mark->code, code->code) == 0)
            found = i;
    }
    return found;
}

static void add(struct review *review, const struct code *code)
{
    struct mark mark = {
        .code = code->code,
        .onset_ns = review->cursor_ns,
        .until_ns = NS_NONE,
        .unit = "",
        .route = "",
        .note = "",
        .state = MARK_MARKED,
        .source = MARK_REVIEW,
        .error_ns = column_error_ns(review),
        .stamp_clock = "",
        .stamp_ns = NS_NONE,
        .stamp_utc_ns = utc_now_ns(),
    };
    mark.state = mark_state_of(code, &mark);
    struct err err = {0};
    int64_t id;
    int failed = store_mark_add(review->store, &mark, "", &id, &err);
    review_reload(review);
    if (failed) {
        keep_unsaved(review, &mark, &err);
        return;
    }
    review->chosen_id = id;
    size_t index = review_chosen_index(review);
    if (index == review->mark_count)
        return;
    say_mark(review, "", index);
    (void)review_ask_lacking(review, index);
}

void review_mark(struct review *review, const struct code *code)
{
    if (!review_writable(review)) {
        review_say_read_only(review);
        return;
    }
    size_t open = code->kind == CODE_SPAN ? open_span(review, code) : review->mark_count;
    if (open == review->mark_count) {
        add(review, code);
        return;
    }
    struct mark mark = review->marks[open];
    mark.until_ns = review->cursor_ns;
    mark.state = mark_state_of(code, &mark);
    (void)change(review, &mark, "end of");
}

static int64_t nudge_ns(const struct review *review)
{
    const struct trace *trace =
        review->focus < review->lane_count ? review->lanes[review->focus].trace : NULL;
    switch (review->nudge) {
    case NUDGE_SAMPLE:
        return trace && trace->rate_hz > 0 ? ns_from_s(1 / trace->rate_hz) : NS_PER_MS;
    case NUDGE_COLUMN:
        return view_cell_ns(&review->view);
    case NUDGE_TENTH:
        return 100 * NS_PER_MS;
    default:
        return NS_PER_S;
    }
}

/* A span keeps its end: only the onset was meant. */
static void move_onset(struct review *review, int64_t onset_ns, int64_t error_ns)
{
    struct mark mark = review->marks[review_chosen_index(review)];
    if (mark.until_ns != NS_NONE && onset_ns > mark.until_ns) {
        review_say(review, INK_WARN, "its onset would come after its end; F3 moves the end");
        return;
    }
    mark.onset_ns = onset_ns;
    mark.error_ns = error_ns;
    if (change(review, &mark, "moved"))
        review_choose(review, review_chosen_index(review));
}

static void nudge(struct review *review, int by)
{
    const struct mark *mark = &review->marks[review_chosen_index(review)];
    move_onset(review, mark->onset_ns + by * nudge_ns(review), mark->error_ns);
}

static void next_nudge(struct review *review)
{
    static const char *const names[] = {"one sample of the chosen trace", "one column", "0.1 s",
                                        "1 s"};
    review->nudge = (review->nudge + 1) % NUDGE_COUNT;
    review_say(review, INK_DIM, "; and : now nudge by %s", names[review->nudge]);
}

static void set_state(struct review *review, enum mark_state state)
{
    size_t index = review_chosen_index(review);
    struct mark mark = review->marks[index];
    bool back = mark.state == state;
    mark.state = MARK_MARKED;
    enum mark_state plain = mark_state_of(review->codes[index], &mark);
    if (!back && state == MARK_CONFIRMED && plain == MARK_INCOMPLETE) {
        review_say(review, INK_WARN, "it is incomplete: Enter fills in what it lacks");
        return;
    }
    mark.state = back ? plain : state;
    (void)change(review, &mark,
                 back                      ? "taken back, again plain:"
                 : state == MARK_CONFIRMED ? "confirmed"
                                           : "rejected");
}

static void travel(struct review *review, bool back)
{
    struct err err = {0};
    bool done = false;
    char what[160] = "";
    int failed = back ? store_undo(review->store, &done, what, sizeof what, &err)
                      : store_redo(review->store, &done, what, sizeof what, &err);
    review_reload(review);
    if (failed)
        review_say(review, INK_ALARM, "NOT SAVED: %s", err.text);
    else if (done)
        review_say(review, INK_GOOD, "saved: %s %s", back ? "undone:" : "redone:", what);
    else
        review_say(review, INK_DIM, "nothing to %s", back ? "undo" : "redo");
    if (done && review->chosen_id == 0)
        review_go(review, review->cursor_ns);
}

static void complete(struct review *review)
{
    size_t index = review_chosen_index(review);
    const struct mark *mark = &review->marks[index];
    const struct code *code = review->codes[index];
    if (review_ask_lacking(review, index))
        return;
    if (code && code->kind == CODE_SPAN && mark->until_ns == NS_NONE)
        review_ask(review, ASK_UNTIL, index);
    else
        review_ask(review, mark->has_value ? ASK_VALUE : ASK_NOTE, index);
}

static void leave(struct review *review)
{
    if (review->unsaved_count > 0 && !review->leaving) {
        review->leaving = true;
        review_say(review, INK_ALARM, "NOT SAVED %zu; the same key again leaves without them",
                   review->unsaved_count);
        return;
    }
    review->done = true;
}

static bool screen_action(struct review *review, enum action action)
{
    switch (action) {
    case ACTION_LIST:
        review->list_open = !review->list_open;
        review_relayout(review);
        review_go(review, review->cursor_ns);
        return true;
    case ACTION_HELP:
        review->help_open = !review->help_open;
        review->help_page = 0;
        return true;
    case ACTION_REDRAW:
        review->repaint = true;
        return true;
    case ACTION_QUIT:
        leave(review);
        return true;
    default:
        return false;
    }
}

static bool edit_action(struct review *review, enum action action)
{
    size_t index = review_chosen_index(review);
    switch (action) {
    case ACTION_COMPLETE:
        complete(review);
        return true;
    case ACTION_EDIT_ONSET:
        review_ask(review, ASK_ONSET, index);
        return true;
    case ACTION_EDIT_UNTIL:
        review_ask(review, ASK_UNTIL, index);
        return true;
    case ACTION_EDIT_VALUE:
        review_ask(review, ASK_VALUE, index);
        return true;
    case ACTION_EDIT_NOTE:
        review_ask(review, ASK_NOTE, index);
        return true;
    default:
        return screen_action(review, action);
    }
}

bool review_mark_action(struct review *review, enum action action)
{
    switch (action) {
    case ACTION_NUDGE_BACK:
    case ACTION_NUDGE_ON:
        nudge(review, action == ACTION_NUDGE_ON ? 1 : -1);
        return true;
    case ACTION_NUDGE_STEP:
        next_nudge(review);
        return true;
    case ACTION_BRING_HERE:
        move_onset(review, review->cursor_ns, column_error_ns(review));
        return true;
    case ACTION_CONFIRM:
        set_state(review, MARK_CONFIRMED);
        return true;
    case ACTION_REJECT:
        set_state(review, MARK_REJECTED);
        return true;
    case ACTION_UNDO:
    case ACTION_REDO:
        travel(review, action == ACTION_UNDO);
        return true;
    default:
        return edit_action(review, action);
    }
}
