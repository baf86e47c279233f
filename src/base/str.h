/*
 * str.h - a growing string, and reading numbers from text without the locale.
 *
 * A str remembers that it ran out of memory, so that a long sequence of puts is checked once,
 * with str_take() or str_failed(). Zero-initialised is empty and ready.
 */
#ifndef BASE_STR_H
#define BASE_STR_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "base/err.h"

struct str {
    char *text; /* NUL-terminated when not NULL */
    size_t length, room;
    bool failed; /* memory ran out: later puts do nothing */
};

void str_put(struct str *str, const char *text);
void str_put_n(struct str *str, const char *text, size_t length);
void str_putc(struct str *str, char c);
void str_putf(struct str *str, const char *format, ...) PRINTF_LIKE(2, 3);
void str_clear(struct str *str); /* empty, memory kept */
void str_free(struct str *str);
bool str_failed(const struct str *str);
const char *str_text(const struct str *str); /* never NULL */

/* One CSV field (RFC 4180): quoted only when it must be. */
void str_put_csv(struct str *str, const char *field);

/* The shortest decimal text that reads back as the same value (for files that must be equal byte
 * for byte). NaN is put as nothing: an empty cell. */
void str_put_float(struct str *str, float value);
void str_put_double(struct str *str, double value);

/* Nanoseconds as seconds, exactly: "12.5", "-0.002777777"; no trailing zeros. */
void str_put_seconds(struct str *str, int64_t ns);

/* The whole of `text` (surrounding blanks allowed) as a number; false when it is none. Always
 * with a decimal point, whatever the locale; number_parse_comma() takes a decimal comma as well.
 * Infinities and NaN are not numbers here. */
bool number_parse(const char *text, double *out);
bool number_parse_comma(const char *text, double *out);
bool integer_parse(const char *text, int64_t *out);

/* Case-insensitive equality for ASCII; true when `text` begins with `start`. */
bool ascii_equal(const char *a, const char *b);
bool ascii_starts(const char *text, const char *start);

/* The next code point of valid UTF-8 at *text, which is moved past it; 0 at the end. A byte that
 * is not UTF-8 gives U+FFFD and moves on by one. */
uint32_t utf8_next(const char **text);
bool utf8_valid(const char *text, size_t length);
/* Writes 1..4 bytes of `code` to out; returns how many. */
size_t utf8_put(char out[4], uint32_t code);

#endif
