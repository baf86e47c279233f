/*
 * fuzz_recipe.c - a recipe from hostile bytes.
 */
#include <stdint.h>

#include "window/recipe.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    static struct codebook *codebook;
    struct recipe *recipe = NULL;
    if (!codebook &&
        codebook_parse(default_codebook_text, default_codebook_size, "default", &codebook, NULL))
        __builtin_trap();
    if (recipe_parse((const char *)data, size, "r.ini", codebook, &recipe, NULL) == 0)
        recipe_free(recipe);
    return 0;
}
