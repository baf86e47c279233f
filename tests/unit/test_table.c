/*
 * test_table.c - spreadsheets as tables: quoting of RFC 4180, delimiters, lines, refusals.
 */
#include <criterion/criterion.h>

#include <string.h>

#include "base/table.h"

static struct table *parse(const char *text)
{
    struct table *table = NULL;
    struct err err = {0};
    cr_assert_eq(table_parse(text, strlen(text), "t.csv", &table, &err), 0, "%s", err.text);
    return table;
}

Test(table, quotes_blanks_and_lines)
{
    struct table *table = parse("\xEF\xBB\xBF"
                                "code,Note\r\n\r\nincision, \"a,\"\"b\"\"\nc\" \r\nx\r\n");
    cr_expect_eq(table_rows(table), 2);
    cr_expect_eq(table_column(table, "note"), 1);
    cr_expect_eq(table_column(table, "absent"), -1);
    cr_expect_str_eq(table_field(table, 0, 1), "a,\"b\"\nc");
    cr_expect_eq(table_line(table, 0), 4);
    cr_expect_str_eq(table_field(table, 1, 0), "x");
    cr_expect_str_eq(table_field(table, 1, 1), "");
    cr_expect_str_eq(table_field(table, 1, -1), "");
    cr_expect_eq(table_width(table, 1), 1);
    cr_expect_eq(table_line(table, 1), 5);
    table_free(table);
}

Test(table, delimiter_of_the_header)
{
    struct table *table = parse("time;value\n1;0,5\n");
    cr_expect_eq(table_delimiter(table), ';');
    cr_expect_str_eq(table_field(table, 0, 1), "0,5");
    table_free(table);
    table = parse("a\tb\n1\t2");
    cr_expect_str_eq(table_field(table, 0, 1), "2");
    table_free(table);
}

Test(table, refusals_name_the_line)
{
    static const struct {
        const char *text, *says;
    } rows[] = {{"", "t.csv: empty"},
                {"\n\n", "t.csv: empty"},
                {"a,b\n1,\"2", "t.csv:2: a quote"},
                {"a,b\n1,x\"y\n", "t.csv:2: a quote"},
                {"a,b\n1,\xB5\n", "t.csv:2: not UTF-8"}};
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        struct table *table = NULL;
        struct err err = {0};
        cr_expect_neq(table_parse(rows[i].text, strlen(rows[i].text), "t.csv", &table, &err), 0);
        cr_expect_null(table);
        cr_expect_eq(strncmp(err.text, rows[i].says, strlen(rows[i].says)), 0, "%s", err.text);
    }
}
