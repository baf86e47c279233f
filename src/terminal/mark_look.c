/*
 * mark_look.c - glyphs, inks and texts of marks. Puts nothing on a canvas.
 */
#include "terminal/mark_look.h"

#include <stdio.h>
#include <string.h>

#include "base/str.h"
#include "codebook/drug_class.h"

enum ink code_ink(const struct code *code)
{
    for (size_t i = 0; code && *code->class_name && drug_class_at(i); i++) {
        if (strcmp(drug_class_at(i)->name, code->class_name) == 0 && INK_CLASS_0 + i < INK_COUNT)
            return (enum ink)(INK_CLASS_0 + i);
    }
    return INK_MARK;
}

enum ink mark_ink(const struct code *code, const struct mark *mark)
{
    if (mark->state == MARK_REJECTED)
        return INK_DIM;
    enum ink ink = code_ink(code);
    return ink == INK_MARK && mark->state == MARK_INCOMPLETE ? INK_WARN : ink;
}

uint32_t mark_state_glyph(const struct mark *mark)
{
    switch (mark->state) {
    case MARK_INCOMPLETE:
        return '?';
    case MARK_CONFIRMED:
        return 0x2713;
    case MARK_REJECTED:
        return 0x00d7;
    default:
        return ' ';
    }
}

uint32_t mark_glyph(const struct code *code)
{
    return code ? code->key : '#';
}

void mark_value_text(const struct mark *mark, char out[VALUE_TEXT_SIZE])
{
    out[0] = '\0';
    if (!mark->has_value)
        return;
    struct str text = {0};
    str_put_double(&text, mark->value);
    bool bare = !*mark->unit || strcmp(mark->unit, "1") == 0;
    (void)snprintf(out, VALUE_TEXT_SIZE, "%s%s%s", str_text(&text), bare ? "" : " ",
                   bare ? "" : mark->unit);
    str_free(&text);
}
