/*
 * unit_scale.h - by what factor one unit is another: mg in ug, ug/kg/min in mg/kg/h. Only units
 * that differ by metric prefixes and by minutes, hours, days and weeks; nothing is known of
 * degrees, international units or substances.
 */
#ifndef CODEBOOK_UNIT_SCALE_H
#define CODEBOOK_UNIT_SCALE_H

#include <stdbool.h>
#include <stddef.h>

/* value in `to` = value in `from` * *factor; false when they measure different things, or when a
 * unit has parentheses. Both must be unit_valid(). */
bool unit_factor(const char *from, const char *to, double *factor);

/* Of a unit that is so much a time, "ug/kg/min": the amount, "ug/kg", and the time in seconds, 60.
 * false when the unit does not end in a time. */
bool unit_per_time(const char *unit, char *amount, size_t size, double *seconds);

#endif
