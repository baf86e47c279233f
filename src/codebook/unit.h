/*
 * unit.h - units of measure as UCUM case-sensitive codes (ucum.org): is this text one, and what
 * people type instead ("mcg", "mmHg", "/kg/min").
 *
 * The subset of the grammar that dose, rate, pressure and setting entries need: metric prefixes,
 * `.` and `/`, integer exponents, parentheses, bracketed and {annotated} atoms. No conversion.
 */
#ifndef CODEBOOK_UNIT_H
#define CODEBOOK_UNIT_H

#include <stdbool.h>
#include <stddef.h>

bool unit_valid(const char *text);

/* The UCUM code for a common spelling ("mmHg" -> "mm[Hg]", "mcg" -> "ug", "IU" -> "[iU]",
 * "degC" -> "Cel"), inside compound units too; a copy of `text` when there is nothing to change. */
void unit_normalise(const char *text, char *out, size_t size);

#endif
