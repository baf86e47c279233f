/*
 * arena.h - memory freed all at once: one arena for each open recording, codebook, recipe.
 *
 * Everything handed out lives until arena_free(). No single item is ever freed. Not thread safe.
 */
#ifndef BASE_ARENA_H
#define BASE_ARENA_H

#include <stddef.h>

#include "base/err.h"

struct arena_block;

struct arena {
    struct arena_block *last; /* newest block; NULL in a zeroed, empty arena */
};

/* `count` zeroed items of `size` bytes, aligned for any type; NULL when out of memory. */
void *arena_alloc(struct arena *arena, size_t count, size_t size) MUST_CHECK;

/* A copy of a string, of `length` bytes of one (always NUL-terminated), or of a formatted one. */
char *arena_string(struct arena *arena, const char *text) MUST_CHECK;
char *arena_string_n(struct arena *arena, const char *text, size_t length) MUST_CHECK;
char *arena_printf(struct arena *arena, const char *format, ...) MUST_CHECK PRINTF_LIKE(2, 3);

void arena_free(struct arena *arena);

#endif
