/*
 * ns.h - time as int64_t nanoseconds: arithmetic, calendar, text.
 *
 * Three time lines occur, all in ns:
 *   case time   since the case's epoch (struct casefile); may be negative
 *   recording time  since a recording's first instant, on that recording's clock
 *   civil time  since 1970-01-01T00:00:00 as the wall clock of the theatre shows it, without a
 *               zone: what file headers and people write. UTC = civil - utc_offset.
 * A double of seconds appears only inside numeric methods.
 */
#ifndef BASE_NS_H
#define BASE_NS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "base/err.h"

#define NS_PER_US   1000LL
#define NS_PER_MS   1000000LL
#define NS_PER_S    1000000000LL
#define NS_PER_MIN  (60 * NS_PER_S)
#define NS_PER_HOUR (3600 * NS_PER_S)
#define NS_PER_DAY  (86400 * NS_PER_S)
#define NS_NONE     INT64_MIN /* "no such time" */

enum { TIME_TEXT_SIZE = 40 }; /* room for any text written here */

double s_from_ns(int64_t ns);
int64_t ns_from_s(double s); /* rounded to nearest; clamped to about +/- 292 years */

/* floor(a * b / c) without overflow in between, for c > 0; clamped to the int64_t range. */
int64_t mul_div(int64_t a, int64_t b, int64_t c);

struct civil {
    int year, month, day; /* month and day from 1; proleptic Gregorian */
    int hour, minute, second;
    int64_t ns; /* 0 .. 999999999 */
};

int64_t civil_to_ns(const struct civil *civil);
struct civil civil_from_ns(int64_t ns);
bool civil_valid(const struct civil *civil); /* a date and time of day that exist */

/* "2031-05-20T09:41:12.250": as many decimals (0, 3, 6, 9) as the value needs. */
void ns_format_civil(int64_t civil_ns, char out[TIME_TEXT_SIZE]);
/* "09:41:12.250", always with `decimals` digits, cut not rounded (a clock never shows ahead). */
void ns_format_day(int64_t civil_ns, int decimals, char out[TIME_TEXT_SIZE]);
/* "+00:34:07.500" from the case's start; hours grow beyond 24. */
void ns_format_elapsed(int64_t case_ns, int decimals, char out[TIME_TEXT_SIZE]);

/* A time as a person types it. */
enum time_kind {
    TIME_ARG_FROM_START, /* +00:34:07.5, -12, +90: ns is case time */
    TIME_ARG_OF_DAY,     /* 09:41:12.250: ns since midnight */
    TIME_ARG_CIVIL,      /* 2031-05-20T09:41:12: ns is civil time */
    TIME_ARG_UTC,        /* the same with Z or +02:00: ns is UTC */
};

struct time_arg {
    enum time_kind kind;
    int64_t ns;
};

MUST_CHECK int time_arg_parse(const char *text, struct time_arg *out, struct err *err);

/* Case time of `arg` in a case whose epoch is epoch_civil_ns on a wall clock utc_offset_s ahead
 * of UTC. A time of day is taken as the one from 6 h before to 18 h after the epoch. */
int64_t time_arg_resolve(const struct time_arg *arg, int64_t epoch_civil_ns, int utc_offset_s);

/* "10s", "250ms", "2min", "1h", "1.5" (seconds): a span. Negative ones are allowed. */
MUST_CHECK int duration_parse(const char *text, int64_t *out_ns, struct err *err);

/* ISO 8601 date and time (T or blank between, fraction of any length, optional Z or +hh:mm). */
bool iso_parse(const char *text, struct time_arg *out);
/* h:mm, h:mm:ss, with a fraction: ns since midnight, below 24 h. */
bool day_time_parse(const char *text, int64_t *out_ns);

/* Now, and how far the wall clock of this machine is ahead of UTC now. */
int64_t utc_now_ns(void);
int utc_offset_now_s(void);

#endif
