/*
 * table.c - reading a table by libcsv into an arena. Knows no columns.
 */
#include "base/table.h"

#include <csv.h>
#include <stdlib.h>
#include <string.h>

#include "base/arena.h"
#include "base/array.h"
#include "base/str.h"

struct row {
    size_t first, count; /* fields[first .. first + count) */
    size_t line;
};

struct table {
    struct arena arena;
    const char **fields;
    size_t field_count, field_room;
    struct row *rows; /* rows[0] is the header */
    size_t row_count, row_room;
    char delimiter;
    size_t line; /* while parsing */
    int failed;
};

static void take_field(void *data, size_t length, void *context)
{
    struct table *table = context;
    const char *text = data;
    while (length > 0 && (text[length - 1] == ' ' || text[length - 1] == '\t'))
        length--;
    while (length > 0 && (*text == ' ' || *text == '\t')) {
        text++;
        length--;
    }
    char *copy = arena_string_n(&table->arena, text ? text : "", length);
    if (!copy || array_reserve((void **)&table->fields, &table->field_room, table->field_count + 1,
                               sizeof *table->fields, NULL)) {
        table->failed = ERR_MEMORY;
        return;
    }
    table->fields[table->field_count++] = copy;
}

static void take_row(int terminator, void *context)
{
    (void)terminator;
    struct table *table = context;
    size_t first = 0;
    if (table->row_count > 0) {
        const struct row *last = &table->rows[table->row_count - 1];
        first = last->first + last->count;
    }
    struct row row = {first, table->field_count - first, table->line};
    bool blank = true;
    for (size_t i = first; i < table->field_count && blank; i++)
        blank = table->fields[i][0] == '\0';
    if (blank) {
        table->field_count = first;
        return;
    }
    if (array_reserve((void **)&table->rows, &table->row_room, table->row_count + 1,
                      sizeof *table->rows, NULL)) {
        table->failed = ERR_MEMORY;
        return;
    }
    table->rows[table->row_count++] = row;
}

static char choose_delimiter(const char *text, size_t size)
{
    static const char choices[] = {',', ';', '\t'};
    size_t best = 0, most = 0;
    for (size_t i = 0; i < sizeof choices; i++) {
        size_t count = 0;
        for (size_t k = 0; k < size && text[k] != '\n'; k++)
            count += text[k] == choices[i];
        if (count > most) {
            most = count;
            best = i;
        }
    }
    return choices[best];
}

/* Feeds the text line by line, so that each row knows on which line it ends. */
static int parse_lines(struct table *table, struct csv_parser *parser, const char *text,
                       size_t size, const char *name, struct err *err)
{
    for (size_t at = 0; at < size && !table->failed;) {
        const char *end = memchr(text + at, '\n', size - at);
        size_t length = end ? (size_t)(end - (text + at)) + 1 : size - at;
        table->line++;
        if (!utf8_valid(text + at, length) || memchr(text + at, '\0', length))
            return err_set(err, ERR_FORMAT,
                           "%s:%zu: not UTF-8 text; save the table as \"CSV UTF-8\"", name,
                           table->line);
        if (csv_parse(parser, text + at, length, take_field, take_row, table) != length)
            return err_set(err, ERR_FORMAT,
                           "%s:%zu: a quote (\") stands where none may; double it inside a quoted "
                           "field",
                           name, table->line);
        at += length;
    }
    if (!table->failed && csv_fini(parser, take_field, take_row, table) != 0)
        return err_set(err, ERR_FORMAT, "%s:%zu: a quote (\") is opened and never closed", name,
                       table->line);
    return table->failed ? err_memory(err, name) : ERR_OK;
}

static int parse(struct table *table, const char *text, size_t size, const char *name,
                 struct err *err)
{
    static const char mark[] = "\xEF\xBB\xBF";
    if (size >= 3 && memcmp(text, mark, 3) == 0) {
        text += 3;
        size -= 3;
    }
    table->delimiter = choose_delimiter(text, size);
    struct csv_parser parser;
    if (csv_init(&parser, CSV_STRICT | CSV_STRICT_FINI) != 0)
        return err_memory(err, name);
    csv_set_delim(&parser, (unsigned char)table->delimiter);
    int failed = parse_lines(table, &parser, text, size, name, err);
    csv_free(&parser);
    if (!failed && table->row_count == 0)
        return err_set(err, ERR_FORMAT, "%s: empty; the first line must name the columns", name);
    return failed;
}

int table_parse(const char *text, size_t size, const char *name, struct table **out,
                struct err *err)
{
    struct table *made = calloc(1, sizeof *made);
    if (!made)
        return err_memory(err, name);
    int failed = parse(made, text, size, name, err);
    if (failed)
        table_free(made);
    else
        *out = made;
    return failed;
}

void table_free(struct table *table)
{
    if (!table)
        return;
    arena_free(&table->arena);
    free(table->fields);
    free(table->rows);
    free(table);
}

size_t table_rows(const struct table *table)
{
    return table->row_count - 1;
}

static const char *field(const struct table *table, size_t row, int column)
{
    const struct row *at = &table->rows[row];
    return column >= 0 && (size_t)column < at->count ? table->fields[at->first + (size_t)column]
                                                     : "";
}

int table_column(const struct table *table, const char *name)
{
    for (int i = 0; (size_t)i < table->rows[0].count; i++) {
        if (ascii_equal(field(table, 0, i), name))
            return i;
    }
    return -1;
}

const char *table_field(const struct table *table, size_t row, int column)
{
    return field(table, row + 1, column);
}

size_t table_line(const struct table *table, size_t row)
{
    return table->rows[row + 1].line;
}

size_t table_columns(const struct table *table)
{
    return table->rows[0].count;
}

const char *table_header(const struct table *table, int column)
{
    return field(table, 0, column);
}

size_t table_width(const struct table *table, size_t row)
{
    return table->rows[row + 1].count;
}

char table_delimiter(const struct table *table)
{
    return table->delimiter;
}
