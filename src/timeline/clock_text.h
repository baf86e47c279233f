/*
 * clock_text.h - a clock's pieces as text, and back: how the store keeps them.
 *
 * JSON: [[at_ns, span_ns, case_ns, case_span_ns, error_ns], ...].
 */
#ifndef TIMELINE_CLOCK_TEXT_H
#define TIMELINE_CLOCK_TEXT_H

#include "base/arena.h"
#include "base/str.h"
#include "timeline/clock_map.h"

void clock_text_put(struct str *out, const struct clock_piece *pieces, size_t count);

/* Pieces in `arena`. ERR_FORMAT when the text is not that of a clock that can be: spans above 0,
 * times rising. "" gives none. */
MUST_CHECK int clock_text_parse(const char *text, struct arena *arena, struct clock_piece **out,
                                size_t *count, struct err *err);

#endif
