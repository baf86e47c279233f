/*
 * drug_class.c - the classes of ISO 26825:2020 with their label colours. The 256-colour numbers are
 * the nearest to the standard's Pantone colours (computed from their usual sRGB values, from
 * memory); a screen is no label.
 */
#include "codebook/drug_class.h"

#include "base/str.h"

static const struct drug_class classes[] = {
    {"induction", "yellow", 220, 3, false},
    {"benzodiazepine", "orange", 208, 3, false},
    {"relaxant", "red", 203, 1, false},
    {"opioid", "blue", 80, 6, false},
    {"vasopressor", "violet", 182, 5, false},
    {"local-anaesthetic", "grey", 248, 7, false},
    {"anticholinergic", "green", 149, 2, false},
    {"anti-emetic", "salmon", 216, 3, false},
    {"hypotensive", "violet", 182, 5, true},
    {"opioid-antagonist", "blue", 80, 6, true},
    {"benzodiazepine-antagonist", "orange", 208, 3, true},
    {"relaxant-reversal", "red", 203, 1, true},
    {"other-drug", "white", 231, 7, false},
};

const struct drug_class *drug_class_find(const char *name)
{
    for (size_t i = 0; i < sizeof classes / sizeof *classes; i++) {
        if (ascii_equal(classes[i].name, name))
            return &classes[i];
    }
    return NULL;
}

const struct drug_class *drug_class_at(size_t index)
{
    return index < sizeof classes / sizeof *classes ? &classes[index] : NULL;
}
