/*
 * drug_class.h - drug classes and the label colours of ISO 26825:2020 for them.
 *
 * A colour helps to tell groups apart and never replaces the word; `pattern` says where the
 * standard's label is striped or reversed, for screens without colour.
 */
#ifndef CODEBOOK_DRUG_CLASS_H
#define CODEBOOK_DRUG_CLASS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

struct drug_class {
    const char *name;   /* as in the codebook's class column: "induction", "opioid", ... */
    const char *colour; /* the standard's word: "yellow" */
    uint8_t xterm;      /* nearest of the 256 terminal colours (background) */
    uint8_t basic;      /* nearest of the 16 */
    bool striped;       /* antagonist: white diagonal stripes */
};

/* NULL when `name` is no drug class. */
const struct drug_class *drug_class_find(const char *name);
const struct drug_class *drug_class_at(size_t index); /* NULL past the end */

#endif
