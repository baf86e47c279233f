/*
 * test_base.c - errors, strings, numbers, time, files.
 */
#include <criterion/criterion.h>

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "base/arena.h"
#include "base/array.h"
#include "base/err.h"
#include "base/file.h"
#include "base/ns.h"
#include "base/str.h"

Test(base, error_keeps_code_and_is_cut_not_overrun)
{
    struct err err = {0};
    char long_text[2000];
    memset(long_text, 'x', sizeof long_text - 1);
    long_text[sizeof long_text - 1] = '\0';
    cr_expect_eq(err_set(&err, ERR_FORMAT, "%s", long_text), ERR_FORMAT);
    cr_expect_eq(strlen(err.text), sizeof err.text - 1);
    cr_expect_eq(err_set(&err, ERR_FORMAT, "byte 12"), ERR_FORMAT);
    cr_expect_eq(err_prefix(&err, "%s", "a.edf"), ERR_FORMAT);
    cr_expect_str_eq(err.text, "a.edf: byte 12");
    cr_expect_eq(err_set(NULL, ERR_IO, "dropped"), ERR_IO);
}

Test(base, array_sizes_that_overflow_are_refused)
{
    void *items = NULL;
    size_t room = 0;
    struct err err = {0};
    cr_expect_eq(array_reserve(&items, &room, SIZE_MAX / 2, 16, &err), ERR_MEMORY);
    cr_expect_null(items);
    cr_expect_eq(array_new(&items, SIZE_MAX, 8, &err), ERR_MEMORY);
}

Test(base, arena_items_are_zeroed_aligned_and_apart)
{
    struct arena arena = {0};
    char *before = NULL;
    for (size_t i = 1; i < 300; i++) {
        char *item = arena_alloc(&arena, i, 7);
        cr_assert_not_null(item);
        cr_expect_eq((uintptr_t)item % _Alignof(max_align_t), 0);
        cr_expect_eq(item[0], 0);
        cr_expect_neq(item, before);
        memset(item, 0xAA, i * 7);
        before = item;
    }
    cr_expect_null(arena_alloc(&arena, SIZE_MAX, 2));
    char *text = arena_printf(&arena, "%s-%d", "lead", 2);
    cr_expect_str_eq(text, "lead-2");
    arena_free(&arena);
}

Test(base, numbers_are_read_whole_or_not_at_all)
{
    static const struct {
        const char *text;
        bool good;
        double value;
    } rows[] = {{"1.5", true, 1.5}, {" -2e3 ", true, -2000}, {"", false, 0},
                {"1.5x", false, 0}, {"0x10", false, 0},      {"nan", false, 0},
                {"inf", false, 0},  {"1e999", false, 0},     {"1,5", false, 0},
                {"1 2", false, 0},  {"+.5", true, 0.5},      {"-", false, 0}};
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        double value = 0;
        bool good = number_parse(rows[i].text, &value);
        cr_expect_eq(good, rows[i].good, "'%s'", rows[i].text);
        if (good)
            cr_expect_eq(value, rows[i].value, "'%s'", rows[i].text);
    }
    double value;
    cr_expect(number_parse_comma("0,1", &value) && value == 0.1);
    int64_t whole;
    cr_expect_not(integer_parse("9223372036854775808", &whole));
    cr_expect(integer_parse("-5", &whole) && whole == -5);
}

Test(base, shortest_numbers_read_back_the_same)
{
    static const float values[] = {0.1f, 1.0f / 3, 16777216.0f, 1e-20f, -75.109728f};
    for (size_t i = 0; i < sizeof values / sizeof *values; i++) {
        struct str str = {0};
        str_put_float(&str, values[i]);
        cr_expect_eq(strtof(str_text(&str), NULL), values[i]);
        str_free(&str);
    }
    struct str str = {0};
    str_put_double(&str, 0.1);
    cr_expect_str_eq(str_text(&str), "0.1");
    str_free(&str);
}

/* Every text is what the C library's own shortest search gives, over values of all sizes. */
Test(base, floats_are_written_shortest)
{
    uint32_t state = 1;
    for (int i = 0; i < 200000; i++) {
        state = state * 1664525u + 1013904223u;
        uint32_t bits = i % 2 ? state : 0x3F800000u + (state >> 9) - (state & 0x07FFFFFFu);
        float value;
        memcpy(&value, &bits, sizeof value);
        if (!isfinite(value))
            continue;
        char want[40];
        for (int digits = 6; digits <= 9; digits++) {
            (void)snprintf(want, sizeof want, "%.*g", digits, (double)value);
            if (strtof(want, NULL) == value)
                break;
        }
        struct str str = {0};
        str_put_float(&str, value);
        cr_assert_str_eq(str_text(&str), want);
        str_free(&str);
    }
}

Test(base, seconds_are_exact)
{
    static const struct {
        int64_t ns;
        const char *text;
    } rows[] = {{0, "0"},
                {1, "0.000000001"},
                {-2777777, "-0.002777777"},
                {12500000000, "12.5"},
                {100000000000, "100"},
                {-1000000001, "-1.000000001"}};
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        struct str str = {0};
        str_put_seconds(&str, rows[i].ns);
        cr_expect_str_eq(str_text(&str), rows[i].text);
        str_free(&str);
    }
}

Test(base, csv_fields_are_quoted_only_when_they_must)
{
    struct str str = {0};
    str_put_csv(&str, "plain");
    str_putc(&str, ',');
    str_put_csv(&str, "a,b");
    str_putc(&str, ',');
    str_put_csv(&str, "say \"now\"");
    cr_expect_str_eq(str_text(&str), "plain,\"a,b\",\"say \"\"now\"\"\"");
    str_free(&str);
}

Test(base, utf8_refuses_what_is_not)
{
    cr_expect(utf8_valid("\xC3\xA9", 2));
    cr_expect_not(utf8_valid("\xC3", 1));
    cr_expect_not(utf8_valid("\xC0\x80", 2));
    cr_expect_not(utf8_valid("\xED\xA0\x80", 3));
    cr_expect(utf8_valid("\xF0\x9F\xA9\xBA", 4));
    const char *text = "\xB5V";
    cr_expect_eq(utf8_next(&text), 0xFFFDu);
    cr_expect_eq(utf8_next(&text), (uint32_t)'V');
    cr_expect_eq(utf8_next(&text), 0u);
}

/* The calendar against known Unix times (POSIX, "Seconds Since the Epoch"). */
Test(base, calendar_matches_known_instants)
{
    struct civil leap = {2000, 2, 29, 12, 0, 0, 0};
    cr_expect_eq(civil_to_ns(&leap), 951825600LL * NS_PER_S);
    struct civil back = civil_from_ns(-1);
    cr_expect_eq(back.year, 1969);
    cr_expect_eq(back.second, 59);
    cr_expect_eq(back.ns, 999999999);
    for (int64_t day = -40000; day < 60000; day++) {
        struct civil civil = civil_from_ns(day * NS_PER_DAY);
        cr_assert_eq(civil_to_ns(&civil), day * NS_PER_DAY);
    }
    struct civil bad = {2031, 2, 29, 0, 0, 0, 0};
    cr_expect_not(civil_valid(&bad));
}

Test(base, times_as_typed)
{
    struct time_arg arg;
    struct err err = {0};
    int64_t epoch = 0, day = 0;
    struct time_arg iso;
    cr_assert(iso_parse("2031-05-20T09:00:00", &iso));
    epoch = iso.ns;
    cr_assert_eq(time_arg_parse("09:41:12.250", &arg, &err), 0);
    cr_expect_eq(time_arg_resolve(&arg, epoch, 7200), 2472250 * NS_PER_MS);
    cr_assert_eq(time_arg_parse("+00:34:07.5", &arg, &err), 0);
    cr_expect_eq(time_arg_resolve(&arg, epoch, 0), 2047500 * NS_PER_MS);
    cr_assert_eq(time_arg_parse("-12", &arg, &err), 0);
    cr_expect_eq(time_arg_resolve(&arg, epoch, 0), -12 * NS_PER_S);
    cr_assert_eq(time_arg_parse("2031-05-20T07:00:01Z", &arg, &err), 0);
    cr_expect_eq(time_arg_resolve(&arg, epoch, 7200), NS_PER_S);
    /* a night case: 01:00 is the next morning */
    cr_assert(iso_parse("2031-05-20T22:00:00", &iso));
    cr_assert_eq(time_arg_parse("01:00", &arg, &err), 0);
    cr_expect_eq(time_arg_resolve(&arg, iso.ns, 0), 3 * NS_PER_HOUR);
    static const char *const bad[] = {"",         "9",  "25:00", "+x", "2031-02-30T00:00",
                                      "+1:2:3:4", "+-5"};
    for (size_t i = 0; i < sizeof bad / sizeof *bad; i++)
        cr_expect_neq(time_arg_parse(bad[i], &arg, &err), 0, "'%s'", bad[i]);
    cr_expect(day_time_parse("23:59:59.9", &day) && day == 86399900 * NS_PER_MS);
    int64_t span;
    cr_expect(duration_parse("250ms", &span, &err) == 0 && span == 250 * NS_PER_MS);
    cr_expect(duration_parse("2min", &span, &err) == 0 && span == 120 * NS_PER_S);
    cr_expect_neq(duration_parse("ten", &span, &err), 0);
}

Test(base, mul_div_is_exact_and_rounds_down)
{
    cr_expect_eq(mul_div(INT64_MAX, 7, 7), INT64_MAX);
    cr_expect_eq(mul_div(-1, 1, 3), -1);
    cr_expect_eq(mul_div(10, 3000000000LL, 1000), 30000000);
}

/* RFC 7693 names the algorithm; the 256-bit value of "abc" is the widely published one. */
Test(base, digest_of_known_text)
{
    uint8_t digest[DIGEST_SIZE];
    char text[DIGEST_TEXT_SIZE];
    digest_bytes("abc", 3, digest);
    digest_text(digest, text);
    cr_expect_str_eq(text, "bddd813c634239723171ef3fee98579b94964e3bb1cb3e427262c8c068d52319");
}

Test(base, outfile_appears_whole_or_not_at_all)
{
    char folder[] = "/tmp/incisura-test-XXXXXX";
    cr_assert_not_null(mkdtemp(folder));
    char path[64];
    (void)snprintf(path, sizeof path, "%s/out.csv", folder);
    struct outfile out;
    struct err err = {0};
    cr_assert_eq(outfile_open(&out, path, &err), 0);
    outfile_write(&out, "half", 4);
    outfile_discard(&out);
    cr_expect_neq(access(path, F_OK), 0);
    cr_assert_eq(outfile_open(&out, path, &err), 0);
    outfile_write(&out, "whole", 5);
    cr_assert_eq(outfile_commit(&out, &err), 0);
    struct mapped mapped;
    cr_assert_eq(disk_files.map(&disk_files, path, &mapped, &err), 0);
    cr_expect_eq(mapped.size, 5);
    disk_files.unmap(&disk_files, &mapped);
    cr_expect_neq(disk_files.map(&disk_files, folder, &mapped, &err), 0);
    cr_expect_not_null(strstr(err.text, "a folder"));
    (void)unlink(path);
    cr_expect_eq(rmdir(folder), 0, "nothing else was left behind");
}
