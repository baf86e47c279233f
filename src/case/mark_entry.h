/*
 * mark_entry.h - making a mark out of typed text: code, times, value, unit, checked against the
 * codebook. Shared by the commands and the review screen.
 */
#ifndef CASE_MARK_ENTRY_H
#define CASE_MARK_ENTRY_H

#include "base/arena.h"
#include "case/casefile.h"

/* As typed; NULL or "" where nothing was. */
struct mark_text {
    const char *code, *at, *until, *value, *unit, *route, *note;
};

/* Fills *out (strings point into `text`, the codebook or `arena`). A dose, rate or setting without
 * value, or a span without end, is MARK_INCOMPLETE. */
MUST_CHECK int mark_entry(const struct casefile *casefile, const struct mark_text *text,
                          struct arena *arena, struct mark *out, struct err *err);

/* A code by its code or, in any letter case, by its label; NULL when there is none. */
const struct code *code_by_text(const struct codebook *codebook, const char *text);

/* The state a mark is in once its fields are as they are: incomplete while it lacks what its code
 * asks for, else marked; a rejected one stays rejected, a complete confirmed one confirmed. `code`
 * may be NULL: a code that is not in the codebook asks for nothing. */
enum mark_state mark_state_of(const struct code *code, const struct mark *mark);

/* "100 mg", "0,1 ug/kg/min", "100": a number, then perhaps a unit, else `usual_unit`. */
enum { UNIT_TEXT_SIZE = 64 };
MUST_CHECK int value_entry(const char *text, const char *usual_unit, double *value,
                           char unit[UNIT_TEXT_SIZE], struct err *err);

/* Is a value within what the codebook calls plausible? Else `why` says in what way not: a unit that
 * cannot be that of the code, or a value outside its limits (mg for ug). */
bool value_plausible(const struct code *code, double value, const char *unit, char *why,
                     size_t size);

/* Dose, rate and setting. */
bool code_takes_value(const struct code *code);

#endif
