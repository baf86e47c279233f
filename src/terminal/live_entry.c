/*
 * live_entry.c - the one line that asks for what a mark still lacks. It never stands between an
 * event and its stamp: the mark is saved before the line opens, and Tab hands the next key back to
 * the codebook.
 */
#include <stdio.h>
#include <string.h>

#include "terminal/keys.h"
#include "terminal/live_impl.h"

/* The value last entered for the same code. */
static void last_value(const struct live *live, const struct code *code, char out[VALUE_TEXT_SIZE])
{
    out[0] = '\0';
    for (size_t i = live->mark_count; i-- > 0;) {
        const struct live_mark *mark = &live->marks[i];
        if (mark->code == code && mark->mark.has_value && mark->mark.state != MARK_REJECTED) {
            mark_value_text(&mark->mark, out);
            return;
        }
    }
}

void live_ask(struct live *live, enum live_asking asking, size_t index)
{
    const struct live_mark *mark = &live->marks[index];
    const char *name = mark->code ? mark->code->label : mark->mark.code;
    char label[80], offer[PROMPT_SIZE] = "", value[VALUE_TEXT_SIZE] = "";
    if (asking == LIVE_ASK_VALUE) {
        last_value(live, mark->code, value);
        (void)snprintf(label, sizeof label, "%.40s in %.20s", name, mark->code->unit);
        (void)snprintf(offer, sizeof offer, "%s", value);
    } else if (asking == LIVE_ASK_CLOCK) {
        (void)snprintf(label, sizeof label, "the device's clock says");
    } else {
        (void)snprintf(label, sizeof label, "%.60s", name);
        (void)snprintf(offer, sizeof offer, "%s", mark->mark.note);
    }
    live->asking = asking;
    live->asked = index;
    live->asked_already = false;
    prompt_open(&live->prompt, label, offer);
}

bool live_ask_lacking(struct live *live, size_t index)
{
    const struct live_mark *mark = &live->marks[index];
    if (code_takes_value(mark->code) && !mark->mark.has_value)
        live_ask(live, LIVE_ASK_VALUE, index);
    else if (mark->code && mark->code->kind == CODE_NOTE && !*mark->mark.note)
        live_ask(live, LIVE_ASK_NOTE, index);
    else
        return false;
    return true;
}

static void refuse(struct live *live, const char *why)
{
    (void)snprintf(live->prompt.problem, sizeof live->prompt.problem, "%.199s", why);
}

static bool take_value(struct live *live, struct mark *mark, char unit[UNIT_TEXT_SIZE])
{
    const struct code *code = live->marks[live->asked].code;
    struct err err = {0};
    char why[120];
    if (value_entry(live->prompt.text, code ? code->unit : "", &mark->value, unit, &err)) {
        refuse(live, err.text);
        return false;
    }
    if (!live->asked_already && !value_plausible(code, mark->value, unit, why, sizeof why)) {
        live->asked_already = true;
        (void)snprintf(live->prompt.problem, sizeof live->prompt.problem, "%.150s; Enter keeps it",
                       why);
        return false;
    }
    mark->has_value = true;
    mark->unit = unit;
    return true;
}

/* "14:05:02", "14:05:02 monitor": what a device's screen showed when the key was pressed. Kept as
 * the note of the sync mark, first the time, then whose it is. */
static bool take_clock(struct live *live, struct mark *mark, char note[PROMPT_SIZE])
{
    char clock[PROMPT_SIZE];
    int64_t of_day;
    const char *text = live->prompt.text + strspn(live->prompt.text, " ");
    size_t length = strcspn(text, " ");
    (void)snprintf(clock, sizeof clock, "%.*s", (int)length, text);
    if (!day_time_parse(clock, &of_day)) {
        refuse(live, "a time of day, then whose: 14:05:02 monitor");
        return false;
    }
    (void)snprintf(note, PROMPT_SIZE, "device clock %.200s", text);
    mark->note = note;
    return true;
}

/* Puts what was typed into the mark; false after saying what is wrong with it. */
static bool take(struct live *live)
{
    struct mark mark = live->marks[live->asked].mark;
    char unit[UNIT_TEXT_SIZE], note[PROMPT_SIZE];
    if (live->asking == LIVE_ASK_VALUE && !take_value(live, &mark, unit))
        return false;
    if (live->asking == LIVE_ASK_CLOCK && !take_clock(live, &mark, note))
        return false;
    if (live->asking == LIVE_ASK_NOTE)
        mark.note = live->prompt.text;
    live_change(live, live->asked, &mark, "");
    prompt_close(&live->prompt);
    live->said[0] = '\0';
    return true;
}

/* Somebody needs the letters now. What was typed is taken if it can be meant; an offer that nobody
 * looked at is not; what cannot be taken is told, and stays open as an incomplete mark. */
static void hurry(struct live *live)
{
    bool typed = !live->prompt.offered && *live->prompt.text;
    live->asked_already = false;
    if (typed && !take(live))
        live_say(live, INK_WARN, "NOT kept: \"%.40s\" (%.120s); . asks again", live->prompt.text,
                 live->prompt.problem);
    else
        live_say(live, INK_DIM, "now the next event's key");
    prompt_close(&live->prompt);
}

bool live_entry_key(struct live *live, const struct event *event)
{
    if (!live->prompt.open)
        return false;
    if (event->key == KEY_IS_TAB) {
        hurry(live);
        return true;
    }
    if (event->key == KEY_IS_CTRL('q')) {
        prompt_close(&live->prompt);
        return false;
    }
    bool keep = live->asked_already && event->key == KEY_IS_ENTER;
    enum prompt_answer answer = prompt_key(&live->prompt, event);
    if (answer == PROMPT_IGNORED)
        return false;
    if (answer == PROMPT_TAKEN && (*live->prompt.text || live->asking == LIVE_ASK_NOTE))
        (void)take(live);
    else if (answer == PROMPT_TAKEN)
        prompt_close(&live->prompt);
    else if (!keep)
        live->asked_already = false;
    return true;
}
