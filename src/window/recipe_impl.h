/*
 * recipe_impl.h - a recipe while it is being read. For recipe.c and recipe_signals.c alone.
 */
#ifndef WINDOW_RECIPE_IMPL_H
#define WINDOW_RECIPE_IMPL_H

#include "base/arena.h"
#include "window/recipe.h"

struct owned {
    struct recipe recipe; /* first: recipe_free() finds the rest */
    struct arena arena;
    const char **codes;
    size_t code_room;
    struct recipe_exclusion *exclusions;
    size_t exclusion_room;
    struct recipe_signal *signals;
    size_t signal_room;
};

struct reading {
    struct owned *owned;
    const struct codebook *codebook;
    const char *at, *end; /* what inih has not asked for yet */
    int line;
    bool seen[16];
    char value[256]; /* of the line that is being read, trimmed, writable */
    int failed;
    struct err *err;
};

/* "r.ini:12: KEY = VALUE: WHY"; returns ERR_FORMAT. */
int recipe_refuse(struct reading *reading, const char *key, const char *value, const char *why);

/* One line of [signals]; `value` is cut into words in place. */
MUST_CHECK int recipe_take_signal(struct reading *reading, const char *key, char *value);

#endif
