/*
 * live_marks.c - what letters do: stamp, open and close spans, take back; and marks that others
 * changed meanwhile. Saves nothing itself: it asks the saver.
 */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "base/array.h"
#include "terminal/live_impl.h"

/* How far off somebody is who says how long ago something was: a quarter of it, 2 s at least. From
 * experience; the review can say better. */
static const int64_t ago_error_least_ns = 2 * NS_PER_S;
enum { AGO_ERROR_PART = 4 };

/* A copy whose texts live as long as the screen. */
static int own(struct live *live, const struct mark *mark, struct mark *out, struct err *err)
{
    struct mark *made;
    int failed = marks_copy(mark, 1, &live->arena, &made, err);
    if (!failed)
        *out = *made;
    return failed;
}

static int append(struct live *live, const struct mark *mark, struct live_mark **out,
                  struct err *err)
{
    struct live_mark made = {.former_until_ns = NS_NONE};
    int failed = own(live, mark, &made.mark, err);
    if (!failed)
        failed = array_reserve((void **)&live->marks, &live->mark_room, live->mark_count + 1,
                               sizeof *live->marks, err);
    if (failed)
        return failed;
    made.code = codebook_find(live->codebook, mark->code);
    made.touched = ++live->touches;
    live->marks[live->mark_count] = made;
    *out = &live->marks[live->mark_count++];
    return ERR_OK;
}

int live_add_known(struct live *live, const struct mark *mark, struct err *err)
{
    struct live_mark *added;
    return append(live, mark, &added, err);
}

bool live_is_open(const struct live_mark *mark)
{
    return mark->code && mark->code->kind == CODE_SPAN && mark->mark.until_ns == NS_NONE &&
           mark->mark.state != MARK_REJECTED;
}

size_t live_open_span(const struct live *live, const struct code *code)
{
    for (size_t i = live->mark_count; i-- > 0;) {
        if (live->marks[i].code == code && live_is_open(&live->marks[i]))
            return i;
    }
    return live->mark_count;
}

enum live_saved live_saved(const struct live *live, const struct live_mark *mark)
{
    if (mark->newest <= live->saving.saved)
        return LIVE_SAVED;
    return live->saving.failing ? LIVE_NOT_SAVED : LIVE_SAVING;
}

/* ---- stamping ---- */

static int64_t error_of(const struct live *live, int64_t ago_ns)
{
    int64_t tie = live->setup.session->tie_error_ns;
    int64_t typed = ago_ns / AGO_ERROR_PART;
    typed = ago_ns == 0 ? 0 : typed > ago_error_least_ns ? typed : ago_error_least_ns;
    return (int64_t)hypot((double)tie, (double)typed);
}

/* Nothing can be queued: memory is gone. It is said as loud as can be, and stays on the screen. */
static void cannot_queue(struct live *live, const struct err *err)
{
    live_say(live, INK_ALARM, "NOT SAVED, write it on paper: %s", err->text);
}

static void say_stamp(struct live *live, const struct live_mark *mark, const char *what)
{
    char clock[TIME_TEXT_SIZE], value[VALUE_TEXT_SIZE];
    live_clock_text(
        live, mark->mark.until_ns != NS_NONE ? mark->mark.until_ns : mark->mark.onset_ns, 3, clock);
    mark_value_text(&mark->mark, value);
    live_say(live, INK_TEXT, "%s  %s%s%s%s%s", clock, mark->code ? mark->code->label : "?",
             *value ? " " : "", value, *what ? " " : "", what);
}

static void add(struct live *live, const struct code *code, const struct event *event,
                int64_t ago_ns)
{
    struct err err = {0};
    struct live_mark *added;
    char clock[BOOT_ID_SIZE + 16];
    (void)snprintf(clock, sizeof clock, "boottime %s", live->setup.session->boot_id);
    struct mark mark = {
        .code = code->code,
        .onset_ns = event->boottime_ns + live->setup.session->case_minus_boottime_ns - ago_ns,
        .until_ns = NS_NONE,
        .unit = "",
        .route = "",
        .note = "",
        .state = MARK_MARKED,
        .source = MARK_LIVE,
        .rater = live->setup.session->rater,
        .error_ns = error_of(live, ago_ns),
        .stamp_clock = clock,
        .stamp_ns = event->boottime_ns,
        .stamp_utc_ns = event->utc_ns,
    };
    mark.state = mark_state_of(code, &mark);
    if (append(live, &mark, &added, &err)) {
        cannot_queue(live, &err);
        return;
    }
    struct live_change change = {.kind = LIVE_ADD, .mark = added->mark, .why = ""};
    if (saver_change(live->setup.saver, &change, &added->added, &err)) {
        live->mark_count--; /* a mark in the list is one that is saved, or will be */
        cannot_queue(live, &err);
        return;
    }
    added->newest = added->added;
    say_stamp(live, added, code->kind == CODE_SPAN ? "begins" : "");
    (void)live_ask_lacking(live, live->mark_count - 1);
}

static void close_span(struct live *live, size_t index, int64_t at_ns)
{
    struct mark mark = live->marks[index].mark;
    mark.until_ns = at_ns > mark.onset_ns ? at_ns : mark.onset_ns;
    live_change(live, index, &mark, "");
    live->marks[index].ended = live->marks[index].newest;
    live->marks[index].former_until_ns = NS_NONE;
    say_stamp(live, &live->marks[index], "ends");
}

void live_stamp(struct live *live, const struct code *code, const struct event *event,
                int64_t ago_ns)
{
    size_t open = code->kind == CODE_SPAN ? live_open_span(live, code) : live->mark_count;
    saver_status(live->setup.saver, &live->saving);
    if (open < live->mark_count)
        close_span(live, open,
                   event->boottime_ns + live->setup.session->case_minus_boottime_ns - ago_ns);
    else
        add(live, code, event, ago_ns);
}

void live_change(struct live *live, size_t index, const struct mark *to, const char *why)
{
    struct err err = {0};
    struct live_mark *mark = &live->marks[index];
    struct mark made;
    if (own(live, to, &made, &err)) {
        cannot_queue(live, &err);
        return;
    }
    made.state = mark_state_of(mark->code, &made);
    struct live_change change = {.kind = LIVE_CHANGE,
                                 .mark = made,
                                 .of_number = mark->added,
                                 .of_id = mark->added ? 0 : mark->mark.id,
                                 .why = why};
    if (saver_change(live->setup.saver, &change, &mark->newest, &err)) {
        cannot_queue(live, &err);
        return;
    }
    mark->mark = made;
    mark->touched = ++live->touches;
}

/* ---- taking back ---- */

static void say_change(struct live *live, size_t index, const char *what)
{
    const struct live_mark *mark = &live->marks[index];
    char clock[TIME_TEXT_SIZE];
    live_clock_text(live, mark->mark.onset_ns, 0, clock);
    live_say(live, INK_TEXT, "%s: %s of %s", what, mark->code ? mark->code->label : "?", clock);
}

/* Number of the newest thing done to a mark in this session that can be taken back: its end, else
 * itself. 0 = there is none. */
static int64_t newest_done(const struct live_mark *mark)
{
    if (mark->mark.state == MARK_REJECTED)
        return 0;
    return mark->mark.until_ns != NS_NONE && mark->ended ? mark->ended : mark->added;
}

/* Number of the taking back that would be put back. What others rejected is theirs. */
static int64_t newest_taken_back(const struct live_mark *mark)
{
    if (mark->mark.state == MARK_REJECTED)
        return mark->taken_back;
    return live_is_open(mark) && mark->former_until_ns != NS_NONE ? mark->end_taken_back : 0;
}

/* Index of the mark with the highest number; mark_count when all have 0. */
static size_t highest(const struct live *live, int64_t (*number)(const struct live_mark *mark))
{
    size_t found = live->mark_count;
    int64_t best = 0;
    for (size_t i = 0; i < live->mark_count; i++) {
        int64_t at = number(&live->marks[i]);
        if (at > best) {
            best = at;
            found = i;
        }
    }
    return found;
}

/* The newest thing done in this session that is not taken back: a mark, or the end of a span, which
 * runs again then. */
void live_take_back(struct live *live)
{
    size_t at = highest(live, newest_done);
    if (at == live->mark_count) {
        live_say(live, INK_DIM, "nothing of this session to take back");
        return;
    }
    struct live_mark *found = &live->marks[at];
    struct mark mark = found->mark;
    bool reopen = newest_done(found) == found->ended;
    int64_t until_ns = mark.until_ns;
    if (reopen)
        mark.until_ns = NS_NONE;
    else
        mark.state = MARK_REJECTED;
    live_change(live, at, &mark, "taken back");
    if (reopen) {
        found->former_until_ns = until_ns;
        found->end_taken_back = found->newest;
    } else {
        found->taken_back = found->newest;
    }
    say_change(live, at, reopen ? "end taken back" : "taken back");
}

/* What was taken back last. */
void live_put_back(struct live *live)
{
    size_t at = highest(live, newest_taken_back);
    if (at == live->mark_count) {
        live_say(live, INK_DIM, "nothing of this session was taken back");
        return;
    }
    struct live_mark *found = &live->marks[at];
    struct mark mark = found->mark;
    bool end = mark.state != MARK_REJECTED;
    if (end)
        mark.until_ns = found->former_until_ns;
    else
        mark.state = MARK_MARKED;
    live_change(live, at, &mark, "put back");
    if (end) {
        found->ended = found->newest;
        found->former_until_ns = NS_NONE;
    }
    say_change(live, at, end ? "end put back" : "put back");
}

/* ---- what others did ---- */

static size_t find_id(const struct live *live, int64_t id)
{
    size_t at = 0;
    while (at < live->mark_count && live->marks[at].mark.id != id)
        at++;
    return at;
}

/* A mark as the case had it. Where a change of ours is under way, or came after they were read,
 * ours stands. */
static void take_one(const struct mark *mark, int64_t as_of, void *context)
{
    struct live *live = context;
    struct err err = {0};
    size_t at = find_id(live, mark->id);
    if (at < live->mark_count && live->marks[at].newest > as_of)
        return;
    int failed = at < live->mark_count ? own(live, mark, &live->marks[at].mark, &err)
                                       : live_add_known(live, mark, &err);
    if (failed)
        live_say(live, INK_ALARM, "changes by others cannot be shown: %s", err.text);
    else if (at < live->mark_count)
        live->marks[at].code = codebook_find(live->codebook, mark->code);
}

static bool all_have_ids(struct live *live)
{
    bool all = true;
    for (size_t i = 0; i < live->mark_count; i++) {
        struct live_mark *mark = &live->marks[i];
        if (mark->mark.id == 0)
            mark->mark.id = saver_mark_id(live->setup.saver, mark->added);
        all = all && mark->mark.id != 0;
    }
    return all;
}

void live_take_in(struct live *live)
{
    /* Marks of ours are known by their ids only once they are saved. */
    if (all_have_ids(live))
        (void)saver_marks(live->setup.saver, take_one, live);
}
