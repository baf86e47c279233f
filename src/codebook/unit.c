/*
 * unit.c - a recursive check of UCUM's case-sensitive grammar over the atoms that theatre records
 * use, and common spellings turned into codes. Converts nothing.
 *
 * Source: The Unified Code for Units of Measure, ucum.org, version 2.2.
 */
#include "codebook/unit.h"

#include <ctype.h>
#include <stdio.h>
#include <string.h>

/* Metric atoms take a prefix; the others do not. */
static const char *const metric[] = {
    "g",   "L", "l", "m", "s", "mol", "Pa", "bar", "eq",    "Hz",     "V",    "A",   "S",
    "Ohm", "W", "J", "U", "K", "Cel", "N",  "kat", "m[Hg]", "m[H2O]", "[iU]", "[IU]"};
static const char *const plain[] = {"%",   "min",   "h", "d",   "wk",      "[ppm]",
                                    "deg", "[drp]", "a", "rad", "[USP'U]", "[degF]"};
static const char prefixes[][3] = {"da", "y", "z", "a", "f", "p", "n", "u", "m",
                                   "c",  "d", "h", "k", "M", "G", "T", "P", "E"};

enum { DEPTH_MOST = 8 };

static bool atom_is(const char *text, size_t length, const char *atom)
{
    return strlen(atom) == length && strncmp(text, atom, length) == 0;
}

static bool metric_atom(const char *text, size_t length)
{
    for (size_t i = 0; i < sizeof metric / sizeof *metric; i++) {
        if (atom_is(text, length, metric[i]))
            return true;
    }
    return false;
}

static bool simple_unit(const char *text, size_t length)
{
    for (size_t i = 0; i < sizeof plain / sizeof *plain; i++) {
        if (atom_is(text, length, plain[i]))
            return true;
    }
    if (metric_atom(text, length))
        return true;
    for (size_t i = 0; i < sizeof prefixes / sizeof *prefixes; i++) {
        size_t prefix = strlen(prefixes[i]);
        if (length > prefix && strncmp(text, prefixes[i], prefix) == 0 &&
            metric_atom(text + prefix, length - prefix))
            return true;
    }
    return false;
}

/* Length of the atom at text: letters, %, and whole brackets. */
static size_t atom_length(const char *text)
{
    size_t at = 0;
    while (isalpha((unsigned char)text[at]) || text[at] == '%' || text[at] == '[') {
        if (text[at] == '[') {
            size_t close = strcspn(text + at, "]");
            if (text[at + close] != ']')
                return 0;
            at += close;
        }
        at++;
    }
    return at;
}

/* "{beats}": printable ASCII without braces. */
static bool annotation(const char **text)
{
    if (**text != '{')
        return true;
    const char *at = *text + 1;
    while (*at && *at != '}' && *at != '{' && *at > 32 && *at < 127)
        at++;
    if (*at != '}')
        return false;
    *text = at + 1;
    return true;
}

static bool term(const char **text, int depth);

static bool component(const char **text, int depth)
{
    if (**text == '(') {
        (*text)++;
        if (depth >= DEPTH_MOST || !term(text, depth + 1) || **text != ')')
            return false;
        (*text)++;
        return true;
    }
    if (**text == '{')
        return annotation(text);
    if (isdigit((unsigned char)**text)) {
        while (isdigit((unsigned char)**text))
            (*text)++;
        return true;
    }
    size_t length = atom_length(*text);
    if (length == 0 || !simple_unit(*text, length))
        return false;
    *text += length;
    if ((**text == '-' || **text == '+') && isdigit((unsigned char)(*text)[1]))
        (*text)++;
    while (isdigit((unsigned char)**text))
        (*text)++;
    return annotation(text);
}

static bool term(const char **text, int depth)
{
    if (**text == '/')
        (*text)++;
    if (!component(text, depth))
        return false;
    while (**text == '.' || **text == '/') {
        (*text)++;
        if (!component(text, depth))
            return false;
    }
    return true;
}

bool unit_valid(const char *text)
{
    return *text && term(&text, 0) && *text == '\0';
}

static const struct {
    const char *spelling, *code;
} spellings[] = {
    {"mmHg", "mm[Hg]"},
    {"cmH2O", "cm[H2O]"},
    {"mcg", "ug"},
    {"\xC2\xB5g", "ug"},
    {"\xCE\xBCg", "ug"},
    {"\xC2\xB5S", "uS"},
    {"\xCE\xBCS", "uS"},
    {"\xC2\xB5V", "uV"},
    {"\xCE\xBCV", "uV"},
    {"IU", "[iU]"},
    {"iU", "[iU]"},
    {"degC", "Cel"},
    {"\xC2\xB0"
     "C",
     "Cel"},
    {"bpm", "/min"},
    {"ml", "mL"},
    {"hr", "h"},
    {"sec", "s"},
    {"MAC", "{MAC}"},
    {"mEq", "meq"},
    {"percent", "%"},
};

/* One part between '/' or '.', replaced when it is a known spelling. */
static const char *part_code(const char *part, size_t length)
{
    for (size_t i = 0; i < sizeof spellings / sizeof *spellings; i++) {
        if (atom_is(part, length, spellings[i].spelling))
            return spellings[i].code;
    }
    return NULL;
}

void unit_normalise(const char *text, char *out, size_t size)
{
    size_t used = 0;
    out[0] = '\0';
    while (*text && used + 1 < size) {
        size_t length = strcspn(text, "/.");
        const char *code = part_code(text, length);
        int wrote = code ? snprintf(out + used, size - used, "%s", code)
                         : snprintf(out + used, size - used, "%.*s", (int)length, text);
        used += wrote > 0 ? (size_t)wrote : 0;
        text += length;
        if (*text && used + 1 < size) {
            out[used++] = *text++;
            out[used] = '\0';
        }
    }
}
