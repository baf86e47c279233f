/*
 * review_entry.c - what is typed about a mark: opening the line with an offer, reading what was
 * typed, saving it. A text that cannot be meant stays in the line with the reason beside it.
 */
#include <stdio.h>
#include <string.h>

#include "terminal/review_impl.h"

/* The value last entered for the same code, by order of entry. */
static void last_value(const struct review *review, size_t index, char out[VALUE_TEXT_SIZE])
{
    const struct mark *best = NULL;
    for (size_t i = 0; i < review->mark_count; i++) {
        const struct mark *mark = &review->marks[i];
        if (mark->has_value && mark->state != MARK_REJECTED && (!best || mark->id > best->id) &&
            strcmp(mark->code, review->marks[index].code) == 0)
            best = mark;
    }
    out[0] = '\0';
    if (best)
        mark_value_text(best, out);
}

/* With as many decimals as it takes to read the same instant back: Enter alone changes nothing. */
static void offer_time(const struct review *review, int64_t at_ns, char out[TIME_TEXT_SIZE])
{
    int decimals = at_ns % NS_PER_MS == 0 ? 3 : at_ns % NS_PER_US == 0 ? 6 : 9;
    review_clock_text(review, at_ns, decimals, out);
}

static void offer(const struct review *review, enum asking asking, size_t index, char *out,
                  size_t size)
{
    char text[TIME_TEXT_SIZE] = "";
    char value[VALUE_TEXT_SIZE] = "";
    const struct mark *mark = index < review->mark_count ? &review->marks[index] : NULL;
    if (asking == ASK_ONSET && mark)
        offer_time(review, mark->onset_ns, text);
    else if (asking == ASK_UNTIL && mark)
        offer_time(review, mark->until_ns == NS_NONE ? review->cursor_ns : mark->until_ns, text);
    else if (asking == ASK_GO_TO)
        review_clock_text(review, review->cursor_ns, 3, text);
    else if (asking == ASK_VALUE && mark && mark->has_value)
        mark_value_text(mark, value);
    else if (asking == ASK_VALUE && mark)
        last_value(review, index, value);
    const char *note = asking == ASK_NOTE && mark ? mark->note : "";
    (void)snprintf(out, size, "%s%s%s", text, value, note);
}

void review_ask(struct review *review, enum asking asking, size_t index)
{
    static const char *const what[] = {
        [ASK_ONSET] = "onset", [ASK_UNTIL] = "until", [ASK_VALUE] = "value", [ASK_NOTE] = "note"};
    char label[80] = "go to", text[PROMPT_SIZE];
    if (asking != ASK_GO_TO) {
        const struct code *code = review->codes[index];
        const char *unit = asking == ASK_VALUE && code ? code->unit : "";
        (void)snprintf(label, sizeof label, "%.50s, %s%s%.20s", mark_label(review, index),
                       what[asking], *unit ? " in " : "", unit);
        review->asked_id = review->marks[index].id;
    }
    offer(review, asking, index, text, sizeof text);
    review->asking = asking;
    prompt_open(&review->prompt, label, text);
}

bool review_ask_lacking(struct review *review, size_t index)
{
    const struct mark *mark = &review->marks[index];
    const struct code *code = review->codes[index];
    if (code_takes_value(code) && !mark->has_value)
        review_ask(review, ASK_VALUE, index);
    else if (code && code->kind == CODE_NOTE && !*mark->note)
        review_ask(review, ASK_NOTE, index);
    else
        return false;
    return true;
}

static void refuse(struct review *review, const char *why)
{
    (void)snprintf(review->prompt.problem, sizeof review->prompt.problem, "%.199s", why);
}

/* false after saying what is wrong. `unit` keeps the text that mark->unit then points to. */
static bool read_value(struct review *review, const struct code *code, struct mark *mark,
                       char unit[UNIT_TEXT_SIZE])
{
    struct err err = {0};
    if (value_entry(review->prompt.text, code ? code->unit : mark->unit, &mark->value, unit,
                    &err)) {
        refuse(review, err.text);
        return false;
    }
    mark->has_value = true;
    mark->unit = unit;
    return true;
}

static bool read_time(struct review *review, int64_t *out)
{
    struct err err = {0};
    if (casefile_time(review->casefile, review->prompt.text, out, &err) == ERR_OK)
        return true;
    refuse(review, err.text);
    return false;
}

/* Puts what was typed into the mark; false after saying what is wrong. */
static bool read_entry(struct review *review, const struct code *code, struct mark *mark,
                       char unit[UNIT_TEXT_SIZE])
{
    int64_t length = mark->until_ns == NS_NONE ? 0 : mark->until_ns - mark->onset_ns;
    switch (review->asking) {
    case ASK_ONSET:
        if (!read_time(review, &mark->onset_ns))
            return false;
        mark->error_ns = 0; /* typed: as good as whoever typed it says */
        if (mark->until_ns != NS_NONE && mark->until_ns < mark->onset_ns)
            mark->until_ns = mark->onset_ns + length;
        return true;
    case ASK_UNTIL:
        if (!*review->prompt.text) {
            mark->until_ns = NS_NONE;
            return true;
        }
        if (!read_time(review, &mark->until_ns))
            return false;
        if (mark->until_ns < mark->onset_ns) {
            refuse(review, "that is before its onset");
            return false;
        }
        return true;
    case ASK_VALUE:
        return read_value(review, code, mark, unit);
    default:
        mark->note = review->prompt.text;
        return true;
    }
}

static void go_to_entry(struct review *review)
{
    int64_t at;
    if (!read_time(review, &at))
        return;
    prompt_close(&review->prompt);
    review_go(review, at);
}

/* The line stays open, text and all, until what was typed is on disk. */
static void save_entry(struct review *review, size_t index)
{
    struct mark mark = review->marks[index];
    char unit[UNIT_TEXT_SIZE];
    if (!read_entry(review, review->codes[index], &mark, unit))
        return;
    mark.state = mark_state_of(review->codes[index], &mark);
    struct err err = {0};
    int64_t id = mark.id;
    int failed = store_mark_change(review->store, &mark, "", &err);
    review_reload(review);
    review->chosen_id = id;
    if (failed) {
        refuse(review, err.text);
        return;
    }
    bool moved = review->asking == ASK_ONSET;
    prompt_close(&review->prompt);
    index = review_chosen_index(review);
    if (moved && index < review->mark_count)
        review_choose(review, index);
    review_say(review, INK_GOOD, "saved");
}

void review_take_entry(struct review *review)
{
    if (review->asking == ASK_GO_TO) {
        go_to_entry(review);
        return;
    }
    for (size_t i = 0; i < review->mark_count; i++) {
        if (review->marks[i].id == review->asked_id) {
            save_entry(review, i);
            return;
        }
    }
    refuse(review, "this mark is no longer there; Esc");
}
