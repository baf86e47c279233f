/*
 * live_running.c - what runs: infusions with what they have given so far, and when a code was last.
 * Sums typed entries; no model of what a body does with them.
 */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "codebook/unit_scale.h"
#include "terminal/live_impl.h"

int64_t live_last_of(const struct live *live, const struct code *code)
{
    int64_t last = NS_NONE;
    for (size_t i = 0; i < live->mark_count; i++) {
        const struct live_mark *mark = &live->marks[i];
        if (mark->code == code && mark->mark.state != MARK_REJECTED && mark->mark.onset_ns > last)
            last = mark->mark.onset_ns;
    }
    return last;
}

static bool counts(const struct live_mark *mark, const struct code *code)
{
    return mark->code == code && mark->mark.has_value && mark->mark.state != MARK_REJECTED;
}

/* The entry of a code that comes next after `after_ns`, and among equal times after `after`; marks
 * are few, and in order of entry, not of time. */
static const struct live_mark *next_entry(const struct live *live, const struct code *code,
                                          const struct live_mark *after)
{
    const struct live_mark *best = NULL;
    for (size_t i = 0; i < live->mark_count; i++) {
        const struct live_mark *at = &live->marks[i];
        bool later = !after || at->mark.onset_ns > after->mark.onset_ns ||
                     (at->mark.onset_ns == after->mark.onset_ns && at > after);
        if (counts(at, code) && later && (!best || at->mark.onset_ns < best->mark.onset_ns))
            best = at;
    }
    return best;
}

/* Adds what an entry gave until `until_ns`. */
static void add_given(struct running *running, const struct mark *mark, int64_t until_ns)
{
    char amount[UNIT_TEXT_SIZE];
    double seconds, factor;
    if (mark->value == 0)
        return;
    if (!unit_per_time(mark->unit, amount, sizeof amount, &seconds)) {
        running->given = NAN;
        return;
    }
    if (!*running->given_unit)
        (void)snprintf(running->given_unit, sizeof running->given_unit, "%s", amount);
    if (!unit_factor(amount, running->given_unit, &factor))
        factor = NAN;
    running->given += mark->value * factor * s_from_ns(until_ns - mark->onset_ns) / seconds;
}

bool live_infusion(const struct live *live, const struct code *code, struct running *out)
{
    struct running running = {.code = code, .since_ns = NS_NONE, .given = 0};
    const struct live_mark *now = next_entry(live, code, NULL);
    if (code->kind != CODE_RATE)
        return false;
    while (now) {
        const struct live_mark *next = next_entry(live, code, now);
        int64_t until = next ? next->mark.onset_ns : live->now_ns;
        if (now->mark.value == 0)
            running = (struct running){.code = code, .since_ns = NS_NONE};
        else if (running.since_ns == NS_NONE)
            running.since_ns = now->mark.onset_ns;
        running.value = now->mark.value;
        running.unit = now->mark.unit;
        add_given(&running, &now->mark, until > now->mark.onset_ns ? until : now->mark.onset_ns);
        now = next;
    }
    *out = running;
    return running.since_ns != NS_NONE;
}
