/*
 * select.h - which marks a recipe takes, and why it leaves the others out.
 */
#ifndef WINDOW_SELECT_H
#define WINDOW_SELECT_H

#include <stddef.h>

#include "base/arena.h"
#include "base/err.h"
#include "store/store.h"
#include "window/recipe.h"

struct excluded {
    int64_t mark; /* its id */
    const char *code;
    const char *reason;
};

struct selection {
    const struct mark **marks; /* taken, in time order, shape (count) */
    size_t count;
    struct excluded *excluded; /* of the codes asked for, shape (excluded_count) */
    size_t excluded_count;
};

/* `marks` is in time order. Everything made lives in `arena`, and points to `marks`. */
MUST_CHECK int select_marks(const struct recipe *recipe, const struct mark *marks, size_t count,
                            struct arena *arena, struct selection *out, struct err *err);

#endif
