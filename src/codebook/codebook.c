/*
 * codebook.c - reading and checking a codebook. Touches no disk and draws nothing.
 */
#include "codebook/codebook.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/arena.h"
#include "base/str.h"
#include "base/table.h"
#include "codebook/unit.h"

static const char *const kind_names[] = {"point",   "span", "dose", "rate",
                                         "setting", "note", "sync"};
enum { KIND_COUNT = 7, UNIT_SIZE = 64, SHOWN_MOST = 64 };

static const char *const column_names[] = {"code",  "label", "key",        "kind",
                                           "unit",  "class", "pairs-with", "required",
                                           "timer", "least", "most",       "help"};
enum column {
    CODE,
    LABEL,
    KEY,
    KIND,
    UNIT,
    CLASS,
    PAIRS,
    REQUIRED,
    TIMER,
    LEAST,
    MOST,
    HELP,
    COLUMN_COUNT
};

struct codebook {
    struct arena arena;
    struct code *codes; /* shape (count) */
    size_t count;
};

struct reading {
    const struct table *table;
    const char *name;
    size_t row;
    int columns[COLUMN_COUNT];
    struct codebook *book;
};

const char *code_kind_name(enum code_kind kind)
{
    return (unsigned)kind < KIND_COUNT ? kind_names[kind] : "";
}

static const char *field(const struct reading *reading, enum column column)
{
    return table_field(reading->table, reading->row, reading->columns[column]);
}

/* "book.csv:12: column 'key': 'VALUE' REASON"; as much of the value as one line can carry. */
static int refuse(const struct reading *reading, enum column column, struct err *err,
                  const char *reason, const char *value)
{
    size_t length = strcspn(value, "\r\n");
    return err_set(err, ERR_FORMAT, "%s:%zu: column '%s': '%.*s' %s", reading->name,
                   table_line(reading->table, reading->row), column_names[column],
                   (int)(length < SHOWN_MOST ? length : SHOWN_MOST), value, reason);
}

static int copy_text(struct reading *reading, enum column column, const char **out, struct err *err)
{
    *out = arena_string(&reading->book->arena, field(reading, column));
    return *out ? ERR_OK : err_memory(err, "a codebook");
}

static bool code_text_valid(const char *text)
{
    static const char allowed[] =
        "abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789-_";
    return *text && strspn(text, allowed) == strlen(text) && strlen(text) <= 64;
}

static int take_code(struct reading *reading, struct code *out, struct err *err)
{
    const char *text = field(reading, CODE);
    if (!code_text_valid(text))
        return refuse(reading, CODE, err, "is not a code; use 1 to 64 letters, digits, '-' and '_'",
                      text);
    for (size_t i = 0; i < reading->row; i++) {
        if (ascii_equal(reading->book->codes[i].code, text))
            return refuse(reading, CODE, err, "is used twice; give each line its own", text);
    }
    int failed = copy_text(reading, CODE, &out->code, err);
    if (!failed)
        failed = copy_text(reading, *field(reading, LABEL) ? LABEL : CODE, &out->label, err);
    return failed;
}

/* Letters belong to the codebook: ASCII ones, and those of other alphabets from U+00C0 on but for
 * the two signs among them. */
static bool is_letter(uint32_t code)
{
    bool ascii = (code >= 'a' && code <= 'z') || (code >= 'A' && code <= 'Z');
    return ascii || (code >= 0xC0 && code < 0x2000 && code != 0xD7 && code != 0xF7);
}

static int take_key(struct reading *reading, struct code *out, struct err *err)
{
    const char *text = field(reading, KEY), *at = text;
    out->key = utf8_next(&at);
    if (out->key == 0)
        return refuse(reading, KEY, err, "is empty; every code needs a key, one letter", text);
    if (*at || !is_letter(out->key))
        return refuse(reading, KEY, err, "is not a key; a key is one letter", text);
    for (size_t i = 0; i < reading->row; i++) {
        if (reading->book->codes[i].key == out->key)
            return err_set(err, ERR_FORMAT,
                           "%s:%zu: column 'key': '%s' is the key of '%s' already; small and "
                           "capital letters are different keys",
                           reading->name, table_line(reading->table, reading->row), text,
                           reading->book->codes[i].code);
    }
    return ERR_OK;
}

static int take_kind(struct reading *reading, struct code *out, struct err *err)
{
    const char *text = field(reading, KIND);
    for (int i = 0; i < KIND_COUNT; i++) {
        if (ascii_equal(text, kind_names[i])) {
            out->kind = (enum code_kind)i;
            return ERR_OK;
        }
    }
    return refuse(reading, KIND, err,
                  "is not a kind; kinds are point, span, dose, rate, setting, note and sync", text);
}

static int take_unit(struct reading *reading, struct code *out, struct err *err)
{
    const char *text = field(reading, UNIT);
    char unit[UNIT_SIZE];
    bool wanted = out->kind == CODE_DOSE || out->kind == CODE_RATE || out->kind == CODE_SETTING;
    if (!*text && wanted)
        return refuse(reading, UNIT, err,
                      "is empty; a dose, rate or setting needs a UCUM unit, or 1 for none", text);
    /* No code is more than twice as long as its spelling: what is normalised is never cut. */
    if (strlen(text) >= UNIT_SIZE / 2)
        return refuse(reading, UNIT, err, "is too long for a unit", text);
    unit_normalise(text, unit, sizeof unit);
    if (*text && !unit_valid(unit))
        return refuse(reading, UNIT, err, "is not a UCUM unit; write mg, ug/kg/min, mm[Hg], %, 1",
                      text);
    out->unit = arena_string(&reading->book->arena, unit);
    return out->unit ? ERR_OK : err_memory(err, "a codebook");
}

static int take_yes(struct reading *reading, enum column column, bool *out, struct err *err)
{
    const char *text = field(reading, column);
    *out = ascii_equal(text, "yes");
    if (*out || !*text || ascii_equal(text, "no"))
        return ERR_OK;
    return refuse(reading, column, err, "is neither yes nor no", text);
}

static int take_limit(struct reading *reading, enum column column, double missing, double *out,
                      struct err *err)
{
    const char *text = field(reading, column);
    *out = missing;
    if (!*text || number_parse_comma(text, out))
        return ERR_OK;
    return refuse(reading, column, err, "is not a number", text);
}

static int take_limits(struct reading *reading, struct code *out, struct err *err)
{
    int failed = take_limit(reading, LEAST, -HUGE_VAL, &out->least, err);
    if (!failed)
        failed = take_limit(reading, MOST, HUGE_VAL, &out->most, err);
    if (!failed && out->least > out->most)
        failed = refuse(reading, MOST, err, "is below the least value", field(reading, MOST));
    return failed;
}

/* More fields than columns: a comma stands unquoted somewhere, and what follows it is lost. */
static int check_width(const struct reading *reading, struct err *err)
{
    size_t columns = table_columns(reading->table);
    for (size_t i = columns; i < table_width(reading->table, reading->row); i++) {
        const char *text = table_field(reading->table, reading->row, (int)i);
        if (*text)
            return err_set(err, ERR_FORMAT,
                           "%s:%zu: column %zu: a field past the last of the %zu columns that line "
                           "1 names; put a text with a '%c' in quotes",
                           reading->name, table_line(reading->table, reading->row), i + 1, columns,
                           table_delimiter(reading->table));
    }
    return ERR_OK;
}

static int take_row(struct reading *reading, struct err *err)
{
    struct code *out = &reading->book->codes[reading->row];
    int failed = check_width(reading, err);
    if (!failed)
        failed = take_code(reading, out, err);
    if (!failed)
        failed = take_key(reading, out, err);
    if (!failed)
        failed = take_kind(reading, out, err);
    if (!failed)
        failed = take_unit(reading, out, err);
    if (!failed)
        failed = take_yes(reading, REQUIRED, &out->required, err);
    if (!failed)
        failed = take_yes(reading, TIMER, &out->timer, err);
    if (!failed)
        failed = take_limits(reading, out, err);
    if (!failed)
        failed = copy_text(reading, CLASS, &out->class_name, err);
    if (!failed)
        failed = copy_text(reading, PAIRS, &out->pairs_with, err);
    if (!failed)
        failed = copy_text(reading, HELP, &out->help, err);
    return failed;
}

static int find_columns(struct reading *reading, struct err *err)
{
    for (int i = 0; i < COLUMN_COUNT; i++) {
        bool needed = i == CODE || i == KEY || i == KIND;
        reading->columns[i] = table_column(reading->table, column_names[i]);
        if (reading->columns[i] < 0 && needed)
            return err_set(err, ERR_FORMAT,
                           "%s:1: no column '%s'; the first line must name code, "
                           "key and kind",
                           reading->name, column_names[i]);
    }
    return ERR_OK;
}

static int check_pairs(struct reading *reading, struct err *err)
{
    for (reading->row = 0; reading->row < reading->book->count; reading->row++) {
        const char *pair = reading->book->codes[reading->row].pairs_with;
        if (*pair && !codebook_find(reading->book, pair))
            return refuse(reading, PAIRS, err, "is no code of this codebook", pair);
    }
    return ERR_OK;
}

static int read_rows(struct reading *reading, struct err *err)
{
    size_t rows = table_rows(reading->table);
    struct codebook *book = reading->book;
    if (rows == 0)
        return err_set(err, ERR_FORMAT, "%s: names columns and no code; add one line a code",
                       reading->name);
    int failed = find_columns(reading, err);
    book->codes = failed ? NULL : arena_alloc(&book->arena, rows, sizeof *book->codes);
    if (!failed && !book->codes)
        failed = err_memory(err, "a codebook");
    for (reading->row = 0; !failed && reading->row < rows; reading->row++)
        failed = take_row(reading, err);
    if (failed)
        return failed;
    book->count = rows;
    return check_pairs(reading, err);
}

int codebook_parse(const char *text, size_t size, const char *name, struct codebook **out,
                   struct err *err)
{
    struct table *table = NULL;
    struct codebook *book = calloc(1, sizeof *book);
    if (!book)
        return err_memory(err, name);
    int failed = table_parse(text, size, name, &table, err);
    if (!failed) {
        struct reading reading = {.table = table, .name = name, .book = book};
        failed = read_rows(&reading, err);
    }
    table_free(table);
    if (failed)
        codebook_free(book);
    else
        *out = book;
    return failed;
}

void codebook_free(struct codebook *codebook)
{
    if (!codebook)
        return;
    arena_free(&codebook->arena);
    free(codebook);
}

size_t codebook_count(const struct codebook *codebook)
{
    return codebook->count;
}

const struct code *codebook_at(const struct codebook *codebook, size_t index)
{
    return index < codebook->count ? &codebook->codes[index] : NULL;
}

const struct code *codebook_find(const struct codebook *codebook, const char *code)
{
    for (size_t i = 0; i < codebook->count; i++) {
        if (strcmp(codebook->codes[i].code, code) == 0)
            return &codebook->codes[i];
    }
    return NULL;
}

const struct code *codebook_by_key(const struct codebook *codebook, uint32_t key)
{
    for (size_t i = 0; i < codebook->count; i++) {
        if (codebook->codes[i].key == key)
            return &codebook->codes[i];
    }
    return NULL;
}
