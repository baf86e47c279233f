/*
 * mark_entry.c - typed text to a mark. Stores nothing.
 */
#include "case/mark_entry.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "base/str.h"
#include "codebook/unit.h"
#include "codebook/unit_scale.h"

static bool given(const char *text)
{
    return text && *text;
}

const struct code *code_by_text(const struct codebook *codebook, const char *text)
{
    const struct code *code = codebook_find(codebook, text);
    for (size_t i = 0; i < codebook_count(codebook) && !code; i++) {
        const struct code *at = codebook_at(codebook, i);
        if (ascii_equal(at->label, text) || ascii_equal(at->code, text))
            code = at;
    }
    return code;
}

bool code_takes_value(const struct code *code)
{
    return code &&
           (code->kind == CODE_DOSE || code->kind == CODE_RATE || code->kind == CODE_SETTING);
}

enum mark_state mark_state_of(const struct code *code, const struct mark *mark)
{
    bool lacks = (code_takes_value(code) && !mark->has_value) ||
                 (code && code->kind == CODE_SPAN && mark->until_ns == NS_NONE) ||
                 (code && code->kind == CODE_NOTE && !given(mark->note));
    if (mark->state == MARK_REJECTED || (mark->state == MARK_CONFIRMED && !lacks))
        return mark->state;
    return lacks ? MARK_INCOMPLETE : MARK_MARKED;
}

/* The codes that look most like what was typed: those with the same first letter. */
static int no_such_code(const struct codebook *codebook, const char *text, struct err *err)
{
    struct str list = {0};
    size_t listed = 0;
    for (size_t i = 0; i < codebook_count(codebook) && listed < 8; i++) {
        const char *code = codebook_at(codebook, i)->code;
        char first[2] = {text[0], '\0'};
        if (ascii_starts(code, first)) {
            str_putf(&list, "%s%s", listed ? ", " : "; with that letter: ", code);
            listed++;
        }
    }
    int failed =
        err_set(err, ERR_NOT_FOUND, "no code '%s' in the case's codebook%s", text, str_text(&list));
    str_free(&list);
    return failed;
}

static int take_unit(const char *text, const struct code *code, struct arena *arena,
                     struct mark *out, struct err *err)
{
    if (!given(text)) {
        out->unit = code->unit;
        return ERR_OK;
    }
    char unit[UNIT_TEXT_SIZE];
    unit_normalise(text, unit, sizeof unit);
    if (!unit_valid(unit))
        return err_set(err, ERR_USAGE,
                       "unit '%s' is not a UCUM code; write mg, ug/kg/min, mm[Hg], %% ...", text);
    char *copy = arena_string(arena, unit);
    out->unit = copy;
    return copy ? ERR_OK : err_memory(err, "a unit");
}

static int take_value(const struct mark_text *text, const struct code *code, struct arena *arena,
                      struct mark *out, struct err *err)
{
    out->unit = "";
    if (!given(text->value)) {
        if (given(text->unit))
            return err_set(err, ERR_USAGE, "a unit without a value; give both");
        return ERR_OK;
    }
    if (!number_parse_comma(text->value, &out->value))
        return err_set(err, ERR_USAGE, "value '%s' is not a number", text->value);
    out->has_value = true;
    return take_unit(text->unit, code, arena, out, err);
}

int mark_entry(const struct casefile *casefile, const struct mark_text *text, struct arena *arena,
               struct mark *out, struct err *err)
{
    const struct codebook *codebook = casefile_codebook(casefile);
    const struct code *code = code_by_text(codebook, text->code);
    if (!code)
        return no_such_code(codebook, text->code, err);
    struct mark made = {
        .state = MARK_MARKED,
        .code = code->code,
        .until_ns = NS_NONE,
        .route = given(text->route) ? text->route : "",
        .note = given(text->note) ? text->note : "",
        .stamp_clock = "",
        .stamp_ns = NS_NONE,
        .stamp_utc_ns = NS_NONE,
    };
    int failed = casefile_time(casefile, text->at, &made.onset_ns, err);
    if (!failed && given(text->until))
        failed = casefile_time(casefile, text->until, &made.until_ns, err);
    if (!failed && made.until_ns != NS_NONE && made.until_ns < made.onset_ns)
        failed =
            err_set(err, ERR_USAGE, "'%s' ends before it begins (%s)", text->code, text->until);
    if (!failed)
        failed = take_value(text, code, arena, &made, err);
    if (failed)
        return failed;
    made.state = mark_state_of(code, &made);
    *out = made;
    return ERR_OK;
}

int value_entry(const char *text, const char *usual_unit, double *value, char unit[UNIT_TEXT_SIZE],
                struct err *err)
{
    char number[UNIT_TEXT_SIZE], typed[UNIT_TEXT_SIZE / 2], made[UNIT_TEXT_SIZE];
    double read;
    text += strspn(text, " ");
    size_t length = strspn(text, "+-.,0123456789");
    const char *rest = text + length + strspn(text + length, " ");
    size_t unit_length = strlen(rest);
    while (unit_length > 0 && rest[unit_length - 1] == ' ')
        unit_length--;
    if (length >= sizeof number || unit_length >= sizeof typed)
        return err_set(err, ERR_USAGE, "too long; a number, then perhaps a unit: 100 mg");
    (void)snprintf(number, sizeof number, "%.*s", (int)length, text);
    (void)snprintf(typed, sizeof typed, "%.*s", (int)unit_length, rest);
    if (!number_parse_comma(number, &read))
        return err_set(err, ERR_USAGE, "a number, then perhaps a unit: 100 mg");
    if (*typed)
        unit_normalise(typed, made, sizeof made);
    else
        (void)snprintf(made, sizeof made, "%s", usual_unit);
    if (*made && !unit_valid(made))
        return err_set(err, ERR_USAGE, "no such unit; UCUM: mg, ug/kg/min, mm[Hg], L/min, %%");
    *value = read;
    memcpy(unit, made, UNIT_TEXT_SIZE);
    return ERR_OK;
}

bool value_plausible(const struct code *code, double value, const char *unit, char *why,
                     size_t size)
{
    double factor = 1;
    if (!code || !code_takes_value(code))
        return true;
    if (strcmp(unit, code->unit) != 0 && !unit_factor(unit, code->unit, &factor)) {
        (void)snprintf(why, size, "%s is usually in %s", code->label, code->unit);
        return false;
    }
    double here = value * factor;
    if (here >= code->least && here <= code->most)
        return true;
    if (here > code->most)
        (void)snprintf(why, size, "%g %s? usually %g at most", here, code->unit, code->most);
    else
        (void)snprintf(why, size, "%g %s? usually %g at least", here, code->unit, code->least);
    return false;
}
