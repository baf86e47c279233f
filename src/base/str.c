/*
 * str.c - growing strings, CSV fields, numbers as text. Knows no file and no terminal.
 */
#include "base/str.h"

#include <ctype.h>
#include <errno.h>
#include <locale.h>
#include <math.h>
#include <pthread.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"

/* strtod and printf follow the process's locale; the terminal needs LC_CTYPE and a user may have
 * LC_NUMERIC set as well, so numbers are read and written under a "C" locale of our own. */
static locale_t c_locale;
static pthread_once_t c_locale_once = PTHREAD_ONCE_INIT;

static void make_c_locale(void)
{
    c_locale = newlocale(LC_ALL_MASK, "C", (locale_t)0);
}

static locale_t enter_c_locale(void)
{
    (void)pthread_once(&c_locale_once, make_c_locale);
    return uselocale(c_locale);
}

static bool reserve(struct str *str, size_t more)
{
    size_t need;
    if (str->failed || __builtin_add_overflow(str->length, more, &need) ||
        __builtin_add_overflow(need, (size_t)1, &need) ||
        array_reserve((void **)&str->text, &str->room, need, 1, NULL))
        str->failed = true;
    return !str->failed;
}

void str_put_n(struct str *str, const char *text, size_t length)
{
    if (!reserve(str, length))
        return;
    if (length > 0)
        memcpy(str->text + str->length, text, length);
    str->length += length;
    str->text[str->length] = '\0';
}

void str_put(struct str *str, const char *text)
{
    str_put_n(str, text, strlen(text));
}

void str_putc(struct str *str, char c)
{
    str_put_n(str, &c, 1);
}

void str_putf(struct str *str, const char *format, ...)
{
    va_list args, again;
    va_start(args, format);
    va_copy(again, args);
    int length = vsnprintf(NULL, 0, format, args);
    va_end(args);
    if (length < 0)
        str->failed = true;
    else if (reserve(str, (size_t)length)) {
        (void)vsnprintf(str->text + str->length, (size_t)length + 1, format, again);
        str->length += (size_t)length;
    }
    va_end(again);
}

void str_clear(struct str *str)
{
    str->length = 0;
    if (str->text)
        str->text[0] = '\0';
}

void str_free(struct str *str)
{
    free(str->text);
    *str = (struct str){0};
}

bool str_failed(const struct str *str)
{
    return str->failed;
}

const char *str_text(const struct str *str)
{
    return str->text ? str->text : "";
}

void str_put_csv(struct str *str, const char *field)
{
    bool edge_blank = field[0] == ' ' || (field[0] && field[strlen(field) - 1] == ' ');
    if (!strpbrk(field, ",\"\r\n") && !edge_blank) {
        str_put(str, field);
        return;
    }
    str_putc(str, '"');
    for (const char *c = field; *c; c++) {
        if (*c == '"')
            str_putc(str, '"');
        str_putc(str, *c);
    }
    str_putc(str, '"');
}

/* Digits enough to tell any two values apart: 9 for float, 17 for double; fewer are tried first,
 * so that 0.1 is written 0.1. */
static void put_shortest(struct str *str, double value, int first, int last, bool is_float)
{
    if (isnan(value))
        return;
    char text[40] = "";
    locale_t before = enter_c_locale();
    for (int digits = first; digits <= last; digits++) {
        (void)snprintf(text, sizeof text, "%.*g", digits, value);
        bool same = is_float ? (double)strtof(text, NULL) == value : strtod(text, NULL) == value;
        if (same)
            break;
    }
    (void)uselocale(before);
    str_put(str, text);
}

/* Writes `digits` (count of them, not all zero) with the decimal point `decimals` from the right,
 * trailing zeros dropped. Returns the length. */
static size_t put_digits(char *out, bool negative, uint64_t digits, int decimals)
{
    char reversed[24] = {0};
    size_t count = 0, length = 0;
    for (; decimals > 0 && digits % 10 == 0; decimals--)
        digits /= 10;
    for (int at = 0; digits > 0 || at <= decimals; at++, digits /= 10) {
        if (at == decimals && decimals > 0)
            reversed[count++] = '.';
        reversed[count++] = (char)('0' + digits % 10);
    }
    if (negative)
        out[length++] = '-';
    while (count > 0)
        out[length++] = reversed[--count];
    return length;
}

/* The usual sizes without printf: the fewest digits, 6 to 9, are found by rounding value * 10^k,
 * and reading them back proves them. false = not found this way. The text is what "%.*g" gives. */
static bool put_usual_float(struct str *str, float value)
{
    static const double tens[] = {1e0, 1e1, 1e2, 1e3,  1e4,  1e5, 1e6,
                                  1e7, 1e8, 1e9, 1e10, 1e11, 1e12};
    double size = fabs((double)value);
    if (!(size >= 1e-3 && size < 1e5))
        return false;
    int exponent = -3;
    while (exponent < 4 && size >= (exponent < -1 ? 1 / tens[-exponent - 1] : tens[exponent + 1]))
        exponent++;
    for (int digits = 6; digits <= 9; digits++) {
        int decimals = digits - 1 - exponent;
        char text[32];
        double rounded = nearbyint(size * tens[decimals]);
        if ((float)(rounded / tens[decimals]) != fabsf(value))
            continue;
        size_t length = put_digits(text, signbit(value), (uint64_t)rounded, decimals);
        text[length] = '\0';
        /* Rounding twice, to double and to float, could differ from rounding once. */
        locale_t before = enter_c_locale();
        bool same = strtof(text, NULL) == value;
        (void)uselocale(before);
        if (!same)
            return false;
        str_put_n(str, text, length);
        return true;
    }
    return false;
}

void str_put_seconds(struct str *str, int64_t ns)
{
    char text[32];
    uint64_t size = ns < 0 ? -(uint64_t)ns : (uint64_t)ns;
    str_put_n(str, text, put_digits(text, ns < 0, size, 9));
}

void str_put_float(struct str *str, float value)
{
    if (put_usual_float(str, value))
        return;
    put_shortest(str, (double)value, 6, 9, true);
}

void str_put_double(struct str *str, double value)
{
    put_shortest(str, value, 15, 17, false);
}

static const char *skip_blanks(const char *text)
{
    while (*text == ' ' || *text == '\t')
        text++;
    return text;
}

/* [sign] digits [. digits] with at most 15 digits in all: the integer of the digits and the power
 * of ten are both exact, so that one division rounds right (W. Clinger 1990, "How to read floating
 * point numbers accurately"). Most numbers in most files are of this kind. */
static bool parse_short(const char *text, double *out)
{
    static const double tens[] = {1e0, 1e1, 1e2,  1e3,  1e4,  1e5,  1e6,  1e7,
                                  1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15};
    bool negative = *text == '-';
    int64_t whole = 0;
    int count = 0, decimals = 0;
    if (*text == '-' || *text == '+')
        text++;
    for (; isdigit((unsigned char)*text); text++, count++) {
        if (count >= 15)
            return false;
        whole = whole * 10 + (*text - '0');
    }
    if (*text == '.') {
        for (text++; isdigit((unsigned char)*text); text++, count++, decimals++) {
            if (count >= 15)
                return false;
            whole = whole * 10 + (*text - '0');
        }
    }
    if (*text || count == 0)
        return false;
    double value = (double)whole / tens[decimals];
    *out = negative ? -value : value;
    return true;
}

bool number_parse(const char *text, double *out)
{
    if (parse_short(text, out))
        return true;
    text = skip_blanks(text);
    /* strtod also reads "inf", "nan" and hexadecimal, none of which a recording or a person means.
     */
    if (!*text || strspn(text, "+-.0123456789eE \t") != strlen(text))
        return false;
    char *end;
    locale_t before = enter_c_locale();
    double value = strtod(text, &end);
    (void)uselocale(before);
    if (end == text || *skip_blanks(end) || !isfinite(value))
        return false;
    *out = value;
    return true;
}

bool number_parse_comma(const char *text, double *out)
{
    char copy[64];
    size_t length = strlen(text);
    if (length >= sizeof copy)
        return number_parse(text, out);
    memcpy(copy, text, length + 1);
    char *comma = strchr(copy, ',');
    if (comma)
        *comma = '.';
    return number_parse(copy, out);
}

bool integer_parse(const char *text, int64_t *out)
{
    text = skip_blanks(text);
    if (!*text || strspn(text, "+-0123456789 \t") != strlen(text))
        return false;
    char *end;
    errno = 0;
    long long value = strtoll(text, &end, 10);
    if (end == text || *skip_blanks(end) || errno == ERANGE)
        return false;
    *out = value;
    return true;
}

bool ascii_equal(const char *a, const char *b)
{
    while (*a && tolower((unsigned char)*a) == tolower((unsigned char)*b)) {
        a++;
        b++;
    }
    return *a == '\0' && *b == '\0';
}

bool ascii_starts(const char *text, const char *start)
{
    while (*start && tolower((unsigned char)*text) == tolower((unsigned char)*start)) {
        text++;
        start++;
    }
    return *start == '\0';
}

/* Length of the valid sequence at text (with `left` bytes there), 0 when it is not UTF-8. */
static size_t sequence(const unsigned char *text, size_t left, uint32_t *code)
{
    static const uint32_t least[5] = {0, 0, 0x80, 0x800, 0x10000};
    unsigned char c = text[0];
    size_t length = c < 0x80 ? 1 : (c & 0xE0) == 0xC0 ? 2 : (c & 0xF0) == 0xE0 ? 3 : 4;
    if (length == 1) {
        *code = c;
        return 1;
    }
    if (c < 0xC2 || c > 0xF4 || length > left)
        return 0;
    uint32_t value = c & (0xFFu >> (length + 1));
    for (size_t i = 1; i < length; i++) {
        if ((text[i] & 0xC0) != 0x80)
            return 0;
        value = (value << 6) | (text[i] & 0x3Fu);
    }
    if (value < least[length] || value > 0x10FFFF || (value >= 0xD800 && value <= 0xDFFF))
        return 0;
    *code = value;
    return length;
}

uint32_t utf8_next(const char **text)
{
    if (!**text)
        return 0;
    uint32_t code = 0xFFFD;
    size_t length = sequence((const unsigned char *)*text, strnlen(*text, 4), &code);
    *text += length ? length : 1;
    return length ? code : 0xFFFD;
}

bool utf8_valid(const char *text, size_t length)
{
    for (size_t at = 0; at < length;) {
        uint32_t code;
        size_t step = sequence((const unsigned char *)text + at, length - at, &code);
        if (step == 0)
            return false;
        at += step;
    }
    return true;
}

size_t utf8_put(char out[4], uint32_t code)
{
    if (code < 0x80) {
        out[0] = (char)code;
        return 1;
    }
    if (code < 0x800) {
        out[0] = (char)(0xC0 | code >> 6);
        out[1] = (char)(0x80 | (code & 0x3F));
        return 2;
    }
    if (code < 0x10000) {
        out[0] = (char)(0xE0 | code >> 12);
        out[1] = (char)(0x80 | (code >> 6 & 0x3F));
        out[2] = (char)(0x80 | (code & 0x3F));
        return 3;
    }
    out[0] = (char)(0xF0 | code >> 18);
    out[1] = (char)(0x80 | (code >> 12 & 0x3F));
    out[2] = (char)(0x80 | (code >> 6 & 0x3F));
    out[3] = (char)(0x80 | (code & 0x3F));
    return 4;
}
