/*
 * unit_scale.c - units taken apart into a factor and base units with exponents, and compared.
 */
#include "codebook/unit_scale.h"

#include <ctype.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { PARTS_MOST = 8, NAME_SIZE = 24 };

struct part {
    char name[NAME_SIZE];
    int exponent;
};

struct taken {
    double factor;
    struct part parts[PARTS_MOST];
    int count;
};

static const struct {
    const char *name;
    double factor;
    const char *base;
} plain[] = {{"min", 60, "s"},      {"h", 3600, "s"},       {"d", 86400, "s"}, {"wk", 604800, "s"},
             {"l", 1, "L"},         {"%", 0.01, "1"},       {"g", 1, "g"},     {"L", 1, "L"},
             {"m", 1, "m"},         {"s", 1, "s"},          {"mol", 1, "mol"}, {"eq", 1, "eq"},
             {"Pa", 1, "Pa"},       {"[iU]", 1, "[iU]"},    {"V", 1, "V"},     {"S", 1, "S"},
             {"m[Hg]", 1, "m[Hg]"}, {"m[H2O]", 1, "m[H2O]"}};

static const struct {
    const char *name;
    double factor;
} prefixes[] = {{"da", 1e1}, {"p", 1e-12}, {"n", 1e-9}, {"u", 1e-6}, {"m", 1e-3}, {"c", 1e-2},
                {"d", 1e-1}, {"h", 1e2},   {"k", 1e3},  {"M", 1e6},  {"G", 1e9}};

static bool find_plain(const char *name, double *factor, const char **base)
{
    for (size_t i = 0; i < sizeof plain / sizeof *plain; i++) {
        if (strcmp(plain[i].name, name) == 0) {
            *factor = plain[i].factor;
            *base = plain[i].base;
            return true;
        }
    }
    return false;
}

/* Factor and base of an atom; one that is not in the list is its own base. */
static void find_atom(const char *name, double *factor, const char **base)
{
    if (find_plain(name, factor, base))
        return;
    for (size_t i = 0; i < sizeof prefixes / sizeof *prefixes; i++) {
        size_t length = strlen(prefixes[i].name);
        if (strncmp(name, prefixes[i].name, length) == 0 &&
            find_plain(name + length, factor, base)) {
            *factor *= prefixes[i].factor;
            return;
        }
    }
    *factor = 1;
    *base = name;
}

static bool add_part(struct taken *taken, const char *base, int exponent)
{
    if (strcmp(base, "1") == 0)
        return true;
    for (int i = 0; i < taken->count; i++) {
        if (strcmp(taken->parts[i].name, base) == 0) {
            taken->parts[i].exponent += exponent;
            return true;
        }
    }
    if (taken->count == PARTS_MOST)
        return false;
    struct part *part = &taken->parts[taken->count++];
    (void)snprintf(part->name, sizeof part->name, "%s", base);
    part->exponent = exponent;
    return true;
}

/* One atom with its exponent; {annotations} say nothing about size. */
static bool take_component(struct taken *taken, const char *text, size_t length, int sign)
{
    char name[NAME_SIZE];
    const char *base;
    double factor;
    size_t brace = strcspn(text, "{");
    length = brace < length ? brace : length;
    size_t end = length;
    while (end > 0 && isdigit((unsigned char)text[end - 1]))
        end--;
    int exponent = end < length ? atoi(text + end) : 1;
    if (end > 0 && (text[end - 1] == '-' || text[end - 1] == '+'))
        exponent *= text[--end] == '-' ? -1 : 1;
    if (end == 0) { /* a bare number, as in "10.mL", or nothing but an annotation */
        taken->factor *= length > 0 ? pow(exponent, sign) : 1;
        return true;
    }
    if (end >= sizeof name || memchr(text, '(', length))
        return false;
    memcpy(name, text, end);
    name[end] = '\0';
    find_atom(name, &factor, &base);
    taken->factor *= pow(factor, sign * exponent);
    return add_part(taken, base, sign * exponent);
}

static bool take_apart(const char *unit, struct taken *out)
{
    int sign = 1;
    *out = (struct taken){.factor = 1};
    while (*unit) {
        if (*unit == '/' || *unit == '.') {
            sign = *unit == '/' ? -1 : 1;
            unit++;
        }
        size_t length = strcspn(unit, "/.");
        if (!take_component(out, unit, length, sign))
            return false;
        unit += length;
    }
    return true;
}

static bool has_part(const struct taken *taken, const struct part *part)
{
    for (int i = 0; i < taken->count; i++) {
        if (strcmp(taken->parts[i].name, part->name) == 0)
            return taken->parts[i].exponent == part->exponent;
    }
    return part->exponent == 0;
}

static bool all_in(const struct taken *a, const struct taken *b)
{
    for (int i = 0; i < a->count; i++) {
        if (!has_part(b, &a->parts[i]))
            return false;
    }
    return true;
}

bool unit_factor(const char *from, const char *to, double *factor)
{
    struct taken a, b;
    if (!take_apart(from, &a) || !take_apart(to, &b) || !all_in(&a, &b) || !all_in(&b, &a))
        return false;
    *factor = a.factor / b.factor;
    return true;
}

bool unit_per_time(const char *unit, char *amount, size_t size, double *seconds)
{
    static const struct {
        const char *name;
        double seconds;
    } times[] = {{"min", 60}, {"h", 3600}, {"s", 1}, {"d", 86400}};
    const char *last = strrchr(unit, '/');
    for (size_t i = 0; last && i < sizeof times / sizeof *times; i++) {
        if (strcmp(last + 1, times[i].name) == 0 && last > unit && (size_t)(last - unit) < size) {
            (void)snprintf(amount, size, "%.*s", (int)(last - unit), unit);
            *seconds = times[i].seconds;
            return true;
        }
    }
    return false;
}
