/*
 * select.c - a recipe's [events] applied to the marks of a case.
 *
 * In this order: code, state, not-within, first only, least distance. A mark that is left out
 * early does not count for the later rules: the first of a code is the first that could be taken.
 */
#include "window/select.h"

#include <stdio.h>
#include <string.h>

#include "base/ns.h"

enum { REASON_SIZE = 160 };

static bool asked_for(const struct recipe *recipe, const char *code)
{
    for (size_t i = 0; i < recipe->code_count; i++) {
        if (strcmp(recipe->codes[i], code) == 0)
            return true;
    }
    return recipe->code_count == 0;
}

/* The end of a span; a point, or a span that is open, ends where it begins. */
static int64_t end_of(const struct mark *mark)
{
    return mark->until_ns == NS_NONE ? mark->onset_ns : mark->until_ns;
}

static bool too_near(const struct recipe *recipe, const struct mark *marks, size_t count,
                     const struct mark *mark, char why[REASON_SIZE])
{
    for (size_t i = 0; i < recipe->exclusion_count; i++) {
        const struct recipe_exclusion *rule = &recipe->exclusions[i];
        for (size_t k = 0; k < count; k++) {
            const struct mark *other = &marks[k];
            if (other == mark || other->state == MARK_REJECTED ||
                strcmp(other->code, rule->code) != 0)
                continue;
            if (mark->onset_ns < other->onset_ns + rule->from_ns ||
                mark->onset_ns > end_of(other) + rule->to_ns)
                continue;
            (void)snprintf(why, REASON_SIZE, "within %g..%g s of %s (mark %lld)",
                           s_from_ns(rule->from_ns), s_from_ns(rule->to_ns), other->code,
                           (long long)other->id);
            return true;
        }
    }
    return false;
}

static bool taken_before(const struct selection *selection, const char *code)
{
    for (size_t i = 0; i < selection->count; i++) {
        if (strcmp(selection->marks[i]->code, code) == 0)
            return true;
    }
    return false;
}

/* True, with the reason, when the mark is left out. */
static bool leave_out(const struct recipe *recipe, const struct selection *selection,
                      const struct mark *marks, size_t count, const struct mark *mark,
                      char why[REASON_SIZE])
{
    if (!recipe->states[mark->state]) {
        (void)snprintf(why, REASON_SIZE, "state is %s", mark_state_name(mark->state));
        return true;
    }
    if (too_near(recipe, marks, count, mark, why))
        return true;
    if (recipe->first && taken_before(selection, mark->code)) {
        (void)snprintf(why, REASON_SIZE, "not the first of its code");
        return true;
    }
    const struct mark *last = selection->count ? selection->marks[selection->count - 1] : NULL;
    if (last && recipe->least_distance_ns > 0 &&
        mark->onset_ns - last->onset_ns < recipe->least_distance_ns) {
        (void)snprintf(why, REASON_SIZE, "%g s after mark %lld, nearer than %g s",
                       s_from_ns(mark->onset_ns - last->onset_ns), (long long)last->id,
                       s_from_ns(recipe->least_distance_ns));
        return true;
    }
    return false;
}

int select_marks(const struct recipe *recipe, const struct mark *marks, size_t count,
                 struct arena *arena, struct selection *out, struct err *err)
{
    struct selection made = {
        .marks = arena_alloc(arena, count + 1, sizeof *made.marks),
        .excluded = arena_alloc(arena, count + 1, sizeof *made.excluded),
    };
    if (!made.marks || !made.excluded)
        return err_memory(err, "the selection");
    for (size_t i = 0; i < count; i++) {
        char why[REASON_SIZE] = "";
        if (!asked_for(recipe, marks[i].code))
            continue;
        if (!leave_out(recipe, &made, marks, count, &marks[i], why)) {
            made.marks[made.count++] = &marks[i];
            continue;
        }
        char *reason = arena_string(arena, why);
        if (!reason)
            return err_memory(err, "the selection");
        made.excluded[made.excluded_count++] =
            (struct excluded){marks[i].id, marks[i].code, reason};
    }
    *out = made;
    return ERR_OK;
}
