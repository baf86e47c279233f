/*
 * arena.c - a list of blocks, each twice the last. Does not reuse or shrink.
 */
#include "base/arena.h"

#include <stdarg.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { FIRST_BLOCK = 4096 };

struct arena_block {
    struct arena_block *older;
    size_t used, room;
    _Alignas(max_align_t) unsigned char bytes[];
};

static struct arena_block *block_new(struct arena_block *older, size_t need)
{
    size_t room = older ? older->room : FIRST_BLOCK / 2;
    if (room < SIZE_MAX / 4)
        room *= 2;
    if (room < need)
        room = need;
    size_t size;
    if (__builtin_add_overflow(room, sizeof(struct arena_block), &size))
        return NULL;
    struct arena_block *block = malloc(size);
    if (!block)
        return NULL;
    block->older = older;
    block->used = 0;
    block->room = room;
    return block;
}

void *arena_alloc(struct arena *arena, size_t count, size_t size)
{
    size_t bytes;
    const size_t align = _Alignof(max_align_t);
    if (__builtin_mul_overflow(count, size, &bytes) || bytes > SIZE_MAX - align)
        return NULL;
    bytes = (bytes + align - 1) / align * align;
    struct arena_block *block = arena->last;
    if (!block || block->room - block->used < bytes) {
        block = block_new(arena->last, bytes);
        if (!block)
            return NULL;
        arena->last = block;
    }
    void *item = block->bytes + block->used;
    block->used += bytes;
    memset(item, 0, bytes);
    return item;
}

char *arena_string_n(struct arena *arena, const char *text, size_t length)
{
    char *copy = length < SIZE_MAX ? arena_alloc(arena, length + 1, 1) : NULL;
    if (copy && length > 0)
        memcpy(copy, text, length);
    return copy;
}

char *arena_string(struct arena *arena, const char *text)
{
    return arena_string_n(arena, text, strlen(text));
}

char *arena_printf(struct arena *arena, const char *format, ...)
{
    va_list args, again;
    va_start(args, format);
    va_copy(again, args);
    int length = vsnprintf(NULL, 0, format, args);
    va_end(args);
    char *text = length < 0 ? NULL : arena_alloc(arena, (size_t)length + 1, 1);
    if (text)
        (void)vsnprintf(text, (size_t)length + 1, format, again);
    va_end(again);
    return text;
}

void arena_free(struct arena *arena)
{
    struct arena_block *block = arena->last;
    while (block) {
        struct arena_block *older = block->older;
        free(block);
        block = older;
    }
    arena->last = NULL;
}
