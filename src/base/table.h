/*
 * table.h - a small CSV table in memory: a header line and rows of text fields, by libcsv.
 *
 * For files people keep in a spreadsheet (codebooks, lists of marks), not for signals: everything
 * is held as text. The delimiter is comma, semicolon or tab, whichever the header line has most
 * of; a byte-order mark, CR LF and quoted fields are taken as they come; blank lines are skipped.
 */
#ifndef BASE_TABLE_H
#define BASE_TABLE_H

#include <stddef.h>

#include "base/err.h"

struct table;

/* `name` (a path) goes into errors only. Text that is not UTF-8, has no header, or a quote that is
 * never closed, is refused with its line. */
MUST_CHECK int table_parse(const char *text, size_t size, const char *name, struct table **out,
                           struct err *err);
void table_free(struct table *table);

size_t table_rows(const struct table *table); /* without the header */
/* Column of that name (any letter case); -1 when there is none. */
int table_column(const struct table *table, const char *name);
/* Blanks around are trimmed; "" for a field the row does not have, or a column of -1. */
const char *table_field(const struct table *table, size_t row, int column);
/* Line of the file (from 1) on which the row ends. */
size_t table_line(const struct table *table, size_t row);
size_t table_columns(const struct table *table);
const char *table_header(const struct table *table, int column);
/* Fields the row really has. */
size_t table_width(const struct table *table, size_t row);
/* ',', ';' or '\t': with the last two a decimal comma may be meant. */
char table_delimiter(const struct table *table);

#endif
