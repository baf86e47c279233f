/*
 * recipe_signals.c - the [signals] of a recipe: NAME = DERIVATION "CHANNEL" parameter=value ...
 * Derives nothing.
 */
#include <ctype.h>
#include <string.h>

#include "base/array.h"
#include "base/str.h"
#include "window/recipe_impl.h"

enum { SIGNAL_WORDS = 40, PARAMETERS = 32 };

static bool name_valid(const char *name)
{
    for (const char *c = name; *c; c++) {
        if (!isalnum((unsigned char)*c) && !strchr("_-.", *c))
            return false;
    }
    return isalpha((unsigned char)*name);
}

/* The next blank-separated word; quotes keep blanks. Moves *text; NULL at the end, or on a quote
 * that is not closed (*open). */
static char *next_word(char **text, bool *quoted, bool *open)
{
    char *from = *text + strspn(*text, " \t");
    if (!*from)
        return NULL;
    *quoted = *from == '"';
    char *end = *quoted ? strchr(from + 1, '"') : from + strcspn(from, " \t");
    *open = *quoted && !end;
    if (!end)
        return NULL;
    from += *quoted;
    *text = *end ? end + 1 : end;
    *end = '\0';
    return from;
}

/* Columns that every table has: a signal of that name would stand there twice. */
static bool is_column(const char *name)
{
    static const char *const columns[] = {"case", "mark", "code", "onset_s", "t_s"};
    for (size_t i = 0; i < sizeof columns / sizeof *columns; i++) {
        if (strcmp(columns[i], name) == 0)
            return true;
    }
    return false;
}

static int check_settings(struct reading *reading, const char *key,
                          const struct recipe_signal *signal)
{
    double values[PARAMETERS];
    struct err why = {0};
    if (derivation_parameter_count(signal->derivation) > PARAMETERS)
        return recipe_refuse(reading, key, signal->derivation->name, "has too many parameters");
    if (derivation_parameters(signal->derivation, signal->settings, signal->setting_count, values,
                              &why) == ERR_OK)
        return ERR_OK;
    return err_set(reading->err, ERR_FORMAT, "%s:%d: %s: %s", reading->owned->recipe.name,
                   reading->line, key, why.text);
}

static int unknown_derivation(struct reading *reading, const char *key, const char *name)
{
    struct str list = {0};
    str_put(&list, "no such derivation; there are");
    for (size_t i = 0; derivations[i]; i++)
        str_putf(&list, "%s %s", i ? "," : "", derivations[i]->name);
    int failed = recipe_refuse(reading, key, name, str_text(&list));
    str_free(&list);
    return failed;
}

static int split_signal(struct reading *reading, const char *key, char *value,
                        struct recipe_signal *out)
{
    struct arena *arena = &reading->owned->arena;
    const char **settings = arena_alloc(arena, SIGNAL_WORDS, sizeof *settings);
    bool quoted, open = false;
    if (!settings)
        return err_memory(reading->err, "a recipe");
    char *word = next_word(&value, &quoted, &open);
    out->derivation = word ? derivation_find(word) : NULL;
    if (!out->derivation)
        return unknown_derivation(reading, key, word ? word : "");
    while ((word = next_word(&value, &quoted, &open))) {
        char *copy = arena_string(arena, word);
        if (!copy)
            return err_memory(reading->err, "a recipe");
        if (quoted && !out->channel)
            out->channel = copy;
        else if (!quoted && strchr(word, '=') && out->setting_count < SIGNAL_WORDS)
            settings[out->setting_count++] = copy;
        else
            return recipe_refuse(
                reading, key, word,
                "write DERIVATION \"CHANNEL\" parameter=value, the channel in quotes");
    }
    out->settings = settings;
    return open ? recipe_refuse(reading, key, value, "a quote is opened and not closed") : ERR_OK;
}

static int check_signal(struct reading *reading, const char *key,
                        const struct recipe_signal *signal)
{
    const struct recipe *recipe = &reading->owned->recipe;
    const char *method = signal->derivation->name;
    for (size_t i = 0; i < recipe->signal_count; i++) {
        if (strcmp(reading->owned->signals[i].name, key) == 0)
            return recipe_refuse(reading, key, method, "this name is given twice");
    }
    if (signal->derivation->kind != DERIVES_TRACE)
        return recipe_refuse(reading, key, method,
                             "an event train, not a trace; it has no value at every instant");
    if (signal->derivation->role == ROLE_NONE && !signal->derivation->needs_train &&
        !signal->channel)
        return recipe_refuse(reading, key, method, "needs a channel: write its name in quotes");
    return check_settings(reading, key, signal);
}

int recipe_take_signal(struct reading *reading, const char *key, char *value)
{
    struct owned *owned = reading->owned;
    struct recipe_signal made = {.line = reading->line};
    if (!name_valid(key))
        return recipe_refuse(reading, key, value,
                             "a signal's name begins with a letter and has letters, digits, _ - .");
    if (is_column(key))
        return recipe_refuse(reading, key, value,
                             "case, mark, code, onset_s and t_s are columns of every table; name "
                             "the signal otherwise");
    int failed = split_signal(reading, key, value, &made);
    if (!failed)
        failed = check_signal(reading, key, &made);
    made.name = failed ? NULL : arena_string(&owned->arena, key);
    if (!failed && !made.name)
        failed = err_memory(reading->err, "a recipe");
    if (!failed)
        failed =
            array_reserve((void **)&owned->signals, &owned->signal_room,
                          owned->recipe.signal_count + 1, sizeof *owned->signals, reading->err);
    if (!failed)
        owned->signals[owned->recipe.signal_count++] = made;
    return failed;
}
