/*
 * mark_look.h - how a mark looks on any screen: its glyphs, its ink, its value as text.
 */
#ifndef TERMINAL_MARK_LOOK_H
#define TERMINAL_MARK_LOOK_H

#include "codebook/codebook.h"
#include "store/store.h"
#include "terminal/canvas.h"

/* The ink of a code: its drug class's label colour, else that of marks. `code` may be NULL. */
enum ink code_ink(const struct code *code);
enum ink mark_ink(const struct code *code, const struct mark *mark);

/* ' ' marked, '?' incomplete, check confirmed, cross rejected. */
uint32_t mark_state_glyph(const struct mark *mark);
/* Code point that stands for the mark: its key, or '#'. */
uint32_t mark_glyph(const struct code *code);

/* "50 mg", "" when it has no value. */
enum { VALUE_TEXT_SIZE = 80 };
void mark_value_text(const struct mark *mark, char out[VALUE_TEXT_SIZE]);

#endif
