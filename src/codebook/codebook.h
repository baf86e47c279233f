/*
 * codebook.h - the study's own list of events: one code, one key, one line of a spreadsheet.
 *
 * CSV with a header line; columns in any order, found by name:
 *   code        required; letters, digits, '-' and '_'; unique; what exports carry
 *   label       shown to people; empty = the code
 *   key         required; one printable character that is a letter; unique (letter case counts)
 *   kind        required; point, span, dose, rate, setting, note or sync
 *   unit        UCUM; required for dose, rate and setting kinds unless the value has no unit ("1")
 *   class       group on the screen; drug classes carry their ISO 26825 colour
 *   pairs-with  code that must follow (on/off written as two codes); must exist
 *   required    yes or empty: `check` misses it in a case
 *   timer       yes or empty: the live screen shows how long ago it was
 *   least, most numbers in the code's unit, or empty: a value outside is asked about once
 *   help        one sentence
 * A bad codebook is refused with the line and the column's name. Nothing here touches the disk.
 */
#ifndef CODEBOOK_CODEBOOK_H
#define CODEBOOK_CODEBOOK_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "base/err.h"

enum code_kind {
    CODE_POINT,   /* incision */
    CODE_SPAN,    /* cautery: the same key opens and closes it */
    CODE_DOSE,    /* propofol 100 mg: value and unit */
    CODE_RATE,    /* remifentanil 0.1 ug/kg/min: in force until the next one */
    CODE_SETTING, /* PEEP 8 cm[H2O]: value, in force until the next one */
    CODE_NOTE,    /* free text */
    CODE_SYNC,    /* the same instant seen on two clocks */
};

struct code {
    const char *code, *label;
    uint32_t key; /* code point */
    enum code_kind kind;
    const char *unit;       /* "" when none */
    const char *class_name; /* "" when none */
    const char *pairs_with; /* "" when none */
    bool required, timer;
    double least, most; /* plausible values in `unit`; -INFINITY and INFINITY when not given */
    const char *help;   /* "" when none */
};

struct codebook;

/* Parses `size` bytes of CSV; `name` (a path) goes into errors only. */
MUST_CHECK int codebook_parse(const char *text, size_t size, const char *name,
                              struct codebook **out, struct err *err);
void codebook_free(struct codebook *codebook);

size_t codebook_count(const struct codebook *codebook);
const struct code *codebook_at(const struct codebook *codebook, size_t index);
const struct code *codebook_find(const struct codebook *codebook, const char *code); /* or NULL */
const struct code *codebook_by_key(const struct codebook *codebook, uint32_t key);   /* or NULL */

const char *code_kind_name(enum code_kind kind);

/* The default codebook for general anaesthesia (schema/codebook.csv), embedded at build. */
extern const char default_codebook_text[];
extern const size_t default_codebook_size;

#endif
