/*
 * recipe.c - reading a recipe by inih: [events] and [window], and the whole. Signals are
 * recipe_signals.c's. Cuts nothing.
 */
#include "window/recipe.h"

#include <ctype.h>
#include <ini.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "base/str.h"
#include "window/recipe_impl.h"

int recipe_refuse(struct reading *reading, const char *key, const char *value, const char *why)
{
    return err_set(reading->err, ERR_FORMAT, "%s:%d: %s = %.80s: %s", reading->owned->recipe.name,
                   reading->line, key, value, why);
}

static char *trim(char *text)
{
    while (isspace((unsigned char)*text))
        text++;
    size_t length = strlen(text);
    while (length > 0 && isspace((unsigned char)text[length - 1]))
        text[--length] = '\0';
    return text;
}

/* The next item of a comma-separated list, trimmed; NULL at the end. */
static char *next_item(char **list)
{
    char *item = strsep(list, ",");
    return item ? trim(item) : NULL;
}

/* "30", "30 s", "2min" */
static bool parse_span(const char *text, int64_t *out)
{
    char packed[40];
    size_t used = 0;
    for (; *text && used + 1 < sizeof packed; text++) {
        if (!isspace((unsigned char)*text))
            packed[used++] = *text;
    }
    packed[used] = '\0';
    return *text == '\0' && duration_parse(packed, out, NULL) == ERR_OK;
}

/* "-30..-5", in s. Cuts the text at the dots. */
static bool parse_range(char *text, int64_t *from, int64_t *to)
{
    char *dots = strstr(text, "..");
    if (!dots)
        return false;
    *dots = '\0';
    return parse_span(text, from) && parse_span(dots + 2, to);
}

/* ---- [events] ---- */

static int known_code(struct reading *reading, const char *key, const char *code)
{
    return codebook_find(reading->codebook, code)
               ? ERR_OK
               : recipe_refuse(reading, key, code, "no such code in the case's codebook");
}

static int take_codes(struct reading *reading, const char *key, char *value)
{
    struct owned *owned = reading->owned;
    if (strcmp(value, "*") == 0)
        return ERR_OK;
    for (char *item; (item = next_item(&value));) {
        int failed = known_code(reading, key, item);
        char *copy = failed ? NULL : arena_string(&owned->arena, item);
        if (!failed && !copy)
            failed = err_memory(reading->err, "a recipe");
        if (!failed)
            failed =
                array_reserve((void **)&owned->codes, &owned->code_room,
                              owned->recipe.code_count + 1, sizeof *owned->codes, reading->err);
        if (failed)
            return failed;
        owned->codes[owned->recipe.code_count++] = copy;
    }
    return ERR_OK;
}

static int take_states(struct reading *reading, const char *key, char *value)
{
    memset(reading->owned->recipe.states, 0, sizeof reading->owned->recipe.states);
    for (char *item; (item = next_item(&value));) {
        enum mark_state state;
        if (!mark_state_from_name(item, &state))
            return recipe_refuse(
                reading, key, item,
                "no such state; states are incomplete, marked, confirmed, rejected");
        reading->owned->recipe.states[state] = true;
    }
    return ERR_OK;
}

static int take_first(struct reading *reading, const char *key, char *value)
{
    reading->owned->recipe.first = ascii_equal(value, "yes");
    if (reading->owned->recipe.first || ascii_equal(value, "no"))
        return ERR_OK;
    return recipe_refuse(reading, key, value, "write yes or no");
}

/* A span of no less than 0, into *out. */
static int take_span(struct reading *reading, const char *key, const char *value, int64_t *out)
{
    return parse_span(value, out) && *out >= 0
               ? ERR_OK
               : recipe_refuse(reading, key, value, "write seconds, 0 or more: 60");
}

static int take_distance(struct reading *reading, const char *key, char *value)
{
    return take_span(reading, key, value, &reading->owned->recipe.least_distance_ns);
}

/* "-120..60 s of cautery" */
static int take_not_within(struct reading *reading, const char *key, char *value)
{
    struct owned *owned = reading->owned;
    struct recipe_exclusion made = {0};
    char *of = strstr(value, " of ");
    if (!of)
        return recipe_refuse(reading, key, value, "write -120..60 of CODE");
    *of = '\0';
    char *code = trim(of + 4);
    int failed = known_code(reading, key, code);
    if (failed)
        return failed;
    if (!parse_range(value, &made.from_ns, &made.to_ns) || made.from_ns > made.to_ns)
        return recipe_refuse(reading, key, value,
                             "write -120..60 of CODE, from the smaller number up");
    made.code = arena_string(&owned->arena, code);
    if (!made.code)
        return err_memory(reading->err, "a recipe");
    failed =
        array_reserve((void **)&owned->exclusions, &owned->exclusion_room,
                      owned->recipe.exclusion_count + 1, sizeof *owned->exclusions, reading->err);
    if (!failed)
        owned->exclusions[owned->recipe.exclusion_count++] = made;
    return failed;
}

/* ---- [window] ---- */

static int take_before(struct reading *reading, const char *key, char *value)
{
    return take_span(reading, key, value, &reading->owned->recipe.before_ns);
}

static int take_after(struct reading *reading, const char *key, char *value)
{
    return take_span(reading, key, value, &reading->owned->recipe.after_ns);
}

static int take_age(struct reading *reading, const char *key, char *value)
{
    return take_span(reading, key, value, &reading->owned->recipe.age_ns);
}

static int take_rate(struct reading *reading, const char *key, char *value)
{
    char *unit = strstr(value, "Hz");
    if (unit)
        *unit = '\0';
    double *out = &reading->owned->recipe.rate_hz;
    return number_parse(trim(value), out) && *out >= 0.001 && *out <= 100000
               ? ERR_OK
               : recipe_refuse(reading, key, value, "write samples a second: 4");
}

static bool baseline_word(struct recipe *recipe, const char *word)
{
    for (int i = 0; i <= BASELINE_Z; i++) {
        if (ascii_equal(word, baseline_mode_name((enum baseline_mode)i))) {
            recipe->baseline_mode = (enum baseline_mode)i;
            return true;
        }
    }
    for (int i = 0; i <= BASELINE_MEDIAN; i++) {
        if (ascii_equal(word, baseline_statistic_name((enum baseline_statistic)i))) {
            recipe->baseline_statistic = (enum baseline_statistic)i;
            return true;
        }
    }
    return ascii_equal(word, "s");
}

static int take_baseline(struct reading *reading, const char *key, char *value)
{
    static const char how[] = "write -30..-5, then mean or median, then none, difference, percent "
                              "or z";
    struct recipe *recipe = &reading->owned->recipe;
    if (ascii_equal(value, "none"))
        return ERR_OK;
    char *words = value, *range = strsep(&words, " \t");
    for (char *word; (word = strsep(&words, " \t"));) {
        if (*word && !baseline_word(recipe, word))
            return recipe_refuse(reading, key, word, how);
    }
    recipe->has_baseline = true;
    if (!parse_range(range, &recipe->baseline_from_ns, &recipe->baseline_to_ns) ||
        recipe->baseline_from_ns >= recipe->baseline_to_ns)
        return recipe_refuse(reading, key, range, how);
    return ERR_OK;
}

static int take_valid(struct reading *reading, const char *key, char *value)
{
    char *percent = strchr(value, '%');
    if (percent)
        *percent = '\0';
    double *out = &reading->owned->recipe.valid_share;
    bool good = number_parse(trim(value), out);
    if (percent)
        *out /= 100;
    return good && *out >= 0 && *out <= 1
               ? ERR_OK
               : recipe_refuse(reading, key, value, "write a share from 0 to 1: 0.8");
}

/* ---- the whole ---- */

static const struct key {
    const char *section, *name;
    bool needed, many;
    int (*take)(struct reading *reading, const char *key, char *value);
} keys[] = {
    {"events", "codes", true, true, take_codes},
    {"events", "states", false, false, take_states},
    {"events", "first", false, false, take_first},
    {"events", "least-distance", false, false, take_distance},
    {"events", "not-within", false, true, take_not_within},
    {"window", "before", true, false, take_before},
    {"window", "after", true, false, take_after},
    {"window", "rate", true, false, take_rate},
    {"window", "baseline", false, false, take_baseline},
    {"window", "valid", false, false, take_valid},
    {"window", "age", false, false, take_age},
};
enum { KEYS = sizeof keys / sizeof *keys };

static int unknown_key(struct reading *reading, const char *section, const char *name,
                       const char *value)
{
    struct str list = {0};
    bool known_section = false;
    for (size_t i = 0; i < KEYS; i++)
        known_section |= strcmp(keys[i].section, section) == 0;
    str_put(&list, known_section
                       ? "no such key; there are"
                       : "stands in no known section; there are [events] [window] [signals]");
    for (size_t i = 0; known_section && i < KEYS; i++) {
        if (strcmp(keys[i].section, section) == 0)
            str_putf(&list, " %s", keys[i].name);
    }
    int failed = recipe_refuse(reading, name, value, str_text(&list));
    str_free(&list);
    return failed;
}

static int take_key(struct reading *reading, const char *section, const char *name,
                    const char *value)
{
    size_t length = strlen(value);
    if (length >= sizeof reading->value)
        return recipe_refuse(reading, name, value, "too long");
    memcpy(reading->value, value, length + 1);
    char *trimmed = trim(reading->value);
    if (strcmp(section, "signals") == 0)
        return recipe_take_signal(reading, name, trimmed);
    for (size_t i = 0; i < KEYS; i++) {
        if (strcmp(keys[i].section, section) != 0 || strcmp(keys[i].name, name) != 0)
            continue;
        if (reading->seen[i] && !keys[i].many)
            return recipe_refuse(reading, name, trimmed, "is given twice");
        reading->seen[i] = true;
        return keys[i].take(reading, name, trimmed);
    }
    return unknown_key(reading, section, name, trimmed);
}

/* inih's callbacks: lines are counted as they are handed out. */
static char *hand_line(char *buffer, int size, void *context)
{
    struct reading *reading = context;
    if (reading->at >= reading->end || reading->failed)
        return NULL;
    size_t left = (size_t)(reading->end - reading->at);
    const char *newline = memchr(reading->at, '\n', left);
    size_t length = newline ? (size_t)(newline - reading->at) + 1 : left;
    reading->line++;
    if (length >= (size_t)size || memchr(reading->at, '\0', length)) {
        reading->failed = err_set(reading->err, ERR_FORMAT,
                                  "%s:%d: a line of %zu characters, or one with a NUL; %d is the "
                                  "most",
                                  reading->owned->recipe.name, reading->line, length, size - 1);
        return NULL;
    }
    memcpy(buffer, reading->at, length);
    buffer[length] = '\0';
    reading->at += length;
    return buffer;
}

static int hand_key(void *context, const char *section, const char *name, const char *value)
{
    struct reading *reading = context;
    if (!reading->failed)
        reading->failed = take_key(reading, section, name, value ? value : "");
    return reading->failed ? 0 : 1;
}

static int missing(struct reading *reading, const char *section, const char *name)
{
    return err_set(reading->err, ERR_FORMAT,
                   "%s: [%s] %s is missing; `incisura help recipe` shows a whole recipe",
                   reading->owned->recipe.name, section, name);
}

static int check(struct reading *reading)
{
    struct recipe *recipe = &reading->owned->recipe;
    for (size_t i = 0; i < KEYS; i++) {
        if (keys[i].needed && !reading->seen[i])
            return missing(reading, keys[i].section, keys[i].name);
    }
    if (recipe->signal_count == 0)
        return missing(reading, "signals", "NAME = DERIVATION");
    double samples = s_from_ns(recipe->before_ns + recipe->after_ns) * recipe->rate_hz;
    if (samples < 1 || samples > 1e7)
        return err_set(reading->err, ERR_FORMAT,
                       "%s: before, after and rate make a window of %.3g samples; 1 to 1e7 can be "
                       "written",
                       recipe->name, samples);
    recipe->samples = (int64_t)llround(samples);
    if (recipe->has_baseline && (recipe->baseline_from_ns < -recipe->before_ns ||
                                 recipe->baseline_to_ns > recipe->after_ns))
        return err_set(reading->err, ERR_FORMAT,
                       "%s: the baseline %g..%g s is not inside the window -%g..%g s", recipe->name,
                       s_from_ns(recipe->baseline_from_ns), s_from_ns(recipe->baseline_to_ns),
                       s_from_ns(recipe->before_ns), s_from_ns(recipe->after_ns));
    return ERR_OK;
}

static int read_all(struct reading *reading)
{
    int code = ini_parse_stream(hand_line, reading, hand_key, reading);
    if (reading->failed)
        return reading->failed;
    if (code < 0)
        return err_memory(reading->err, "a recipe");
    if (code > 0)
        return err_set(reading->err, ERR_FORMAT, "%s:%d: neither a [section] nor NAME = VALUE",
                       reading->owned->recipe.name, code);
    return check(reading);
}

static int set_up(struct owned *owned, const char *text, size_t size, const char *name,
                  struct err *err)
{
    owned->recipe.name = arena_string(&owned->arena, name);
    owned->recipe.text = arena_string_n(&owned->arena, text, size);
    owned->recipe.size = size;
    owned->recipe.states[MARK_INCOMPLETE] = true;
    owned->recipe.states[MARK_MARKED] = true;
    owned->recipe.states[MARK_CONFIRMED] = true;
    owned->recipe.valid_share = 0.5;
    owned->recipe.age_ns = 60 * NS_PER_S;
    return owned->recipe.name && owned->recipe.text ? ERR_OK : err_memory(err, name);
}

int recipe_parse(const char *text, size_t size, const char *name, const struct codebook *codebook,
                 struct recipe **out, struct err *err)
{
    struct owned *owned = calloc(1, sizeof *owned);
    if (!owned)
        return err_memory(err, name);
    struct reading reading = {
        .owned = owned, .codebook = codebook, .at = text, .end = text + size, .err = err};
    int failed = set_up(owned, text, size, name, err);
    if (!failed && !utf8_valid(text, size))
        failed = err_set(err, ERR_FORMAT, "%s: not UTF-8 text", name);
    if (!failed)
        failed = read_all(&reading);
    owned->recipe.codes = owned->codes;
    owned->recipe.exclusions = owned->exclusions;
    owned->recipe.signals = owned->signals;
    if (failed)
        recipe_free(&owned->recipe);
    else
        *out = &owned->recipe;
    return failed;
}

void recipe_free(struct recipe *recipe)
{
    if (!recipe)
        return;
    struct owned *owned = (struct owned *)(void *)recipe;
    free((void *)owned->codes);
    free(owned->exclusions);
    free(owned->signals);
    arena_free(&owned->arena);
    free(owned);
}

const char *baseline_mode_name(enum baseline_mode mode)
{
    static const char *const names[] = {"none", "difference", "percent", "z"};
    return names[mode];
}

const char *baseline_statistic_name(enum baseline_statistic statistic)
{
    return statistic == BASELINE_MEDIAN ? "median" : "mean";
}

double recipe_time_s(const struct recipe *recipe, int64_t k)
{
    /* Counted from the mark: k / rate - before would leave 3.6e-15 where 0 is meant. */
    double lead = s_from_ns(recipe->before_ns) * recipe->rate_hz, whole = nearbyint(lead);
    if (fabs(lead - whole) < 1e-6)
        lead = whole;
    return ((double)k - lead) / recipe->rate_hz;
}
