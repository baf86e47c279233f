/*
 * fuzz_codebook.c - a codebook from hostile bytes, and each field of it as a unit.
 */
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include "codebook/codebook.h"
#include "codebook/unit.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    struct codebook *book = NULL;
    char text[128], out[64];
    if (codebook_parse((const char *)data, size, "book.csv", &book, NULL) == 0) {
        for (size_t i = 0; i < codebook_count(book); i++) {
            const struct code *code = codebook_at(book, i);
            if (codebook_by_key(book, code->key) != code || codebook_find(book, code->code) != code)
                abort();
        }
        codebook_free(book);
    }
    size_t length = size < sizeof text ? size : sizeof text - 1;
    memcpy(text, data, length);
    text[length] = '\0';
    unit_normalise(text, out, sizeof out);
    (void)unit_valid(text);
    return 0;
}
