/*
 * array.c - overflow-checked array memory. Holds no container type.
 */
#include "base/array.h"

#include <stdlib.h>

int array_reserve(void **items, size_t *room, size_t need, size_t item_size, struct err *err)
{
    if (need <= *room)
        return ERR_OK;
    size_t want = *room < 8 ? 8 : *room;
    while (want < need) {
        if (__builtin_mul_overflow(want, (size_t)2, &want))
            return err_memory(err, "growing a list");
    }
    size_t size;
    if (__builtin_mul_overflow(want, item_size, &size))
        return err_memory(err, "growing a list");
    void *grown = realloc(*items, size);
    if (!grown)
        return err_memory(err, "growing a list");
    *items = grown;
    *room = want;
    return ERR_OK;
}

int array_new(void **out, size_t count, size_t item_size, struct err *err)
{
    size_t size;
    if (__builtin_mul_overflow(count ? count : 1, item_size, &size))
        return err_memory(err, "a list");
    void *made = malloc(size);
    if (!made)
        return err_memory(err, "a list");
    *out = made;
    return ERR_OK;
}

int array_new_zero(void **out, size_t count, size_t item_size, struct err *err)
{
    void *made = calloc(count ? count : 1, item_size);
    if (!made)
        return err_memory(err, "a list");
    *out = made;
    return ERR_OK;
}
