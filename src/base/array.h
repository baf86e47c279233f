/*
 * array.h - growing a plain C array, with overflow-checked sizes.
 *
 * Use:  struct mark *marks = NULL; size_t count = 0, room = 0;
 *       if (array_reserve((void **)&marks, &room, count + 1, sizeof *marks, err)) ...
 * The caller owns and frees the array with free(). New items are not initialised.
 */
#ifndef BASE_ARRAY_H
#define BASE_ARRAY_H

#include <stddef.h>

#include "base/err.h"

/* Makes room for at least `need` items; grows by doubling. Untouched on failure. */
MUST_CHECK int array_reserve(void **items, size_t *room, size_t need, size_t item_size,
                             struct err *err);

/* malloc(count * size) and calloc with the same check; *out untouched on failure. A count of 0
 * still gives a pointer that can be freed. */
MUST_CHECK int array_new(void **out, size_t count, size_t item_size, struct err *err);
MUST_CHECK int array_new_zero(void **out, size_t count, size_t item_size, struct err *err);

#endif
