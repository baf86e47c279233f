/*
 * test_stream_parser.c - lines of numbers as they stream in: headers, rows, garbled ones, breaks.
 * Every input is played whole, byte by byte and in random pieces. Rates are test_line_rate.c's,
 * records test_record_stream.c's.
 */
#include <criterion/criterion.h>

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/ns.h"
#include "stream_log.h"

TestSuite(stream_parser);

static struct stream_log play_text(const char *text, double rate_hz)
{
    struct input input = {.rate_hz = rate_hz};
    input_put_n(&input, text, strlen(text));
    return input_play(&input);
}

/* Values of all blocks, one after the other. */
static void expect_values(const struct stream_log *log, const float *want, size_t count)
{
    cr_assert_eq(log->value_count, count, "%zu values, not %zu; %s", log->value_count, count,
                 log->complaint);
    for (size_t i = 0; i < count; i++)
        cr_assert(isnan(want[i]) ? isnan(log->values[i]) : log->values[i] == want[i],
                  "value %zu is %g, not %g", i, (double)log->values[i], (double)want[i]);
}

/* Ten rows a second whose values are 1, 2; 3, 4; ... */
static const float counted[] = {1, 2, 3, 4, 5, 6, 7, 8, 9, 10};

/* ---- headers ---- */

Test(stream_parser, a_header_names_channels_and_time)
{
    struct stream_log log = play_text("t,ECG II [mV],EDA [uS]\n0,1,2\n0.1,3,4\n0.2,5,6\n"
                                      "0.3,7,8\n0.4,9,10\n",
                                      0);
    cr_assert_eq(log.headers, 1);
    cr_assert_eq(log.channel_count, 2);
    cr_expect_str_eq(log.labels[0], "ECG II");
    cr_expect_str_eq(log.units[0], "mV");
    cr_expect_eq(log.channels[0].role, ROLE_ECG);
    cr_expect_str_eq(log.labels[1], "EDA");
    cr_expect_str_eq(log.units[1], "uS");
    cr_expect_eq(log.channels[1].samples, 1);
    cr_expect_eq(log.block_ns * 10, log.blocks * NS_PER_S);
    expect_values(&log, counted, 10);
    cr_expect_eq(log.own_ns[4], 400 * NS_PER_MS);
    cr_expect_eq(log.garbled, 0);
    cr_expect_str_eq(log.complaint, "");
    stream_log_free(&log);
}

Test(stream_parser, delimiters_and_decimal_commas)
{
    static const char *const texts[] = {
        "t\tECG II [mV]\tEDA\n0\t1\t2\n0.1\t3\t4\n0.2\t5\t6\n0.3\t7\t8\n0.4\t9\t10\n",
        "t\tECG II [mV]\tEDA\n0,0\t1,0\t2\n0,1\t3\t4\n0,2\t5\t6,00\n0,3\t7\t8\n0,4\t9\t10\n",
        "t;ECG II [mV];EDA\n0;1;2\n0,1;3,0;4\n0,2;5;6\n0,3;7;8,0\n0,4;9;10\n",
        "t;ECG II [mV];EDA\n0;1;2\n0.1;3;4\n0.2;5;6\n0.3;7;8\n0.4;9;10\n",
        " t , ECG II [mV] , EDA\n 0 , 1, 2\n 0.1, 3, 4\n0.2, 5, 6\n0.3 ,7,8\n0.4,9,10\n",
        "EDA,t,ECG II [mV]\n1,0,2\n3,0.1,4\n5,0.2,6\n7,0.3,8\n9,0.4,10\n",
        "t,\"ECG II [mV]\",\"EDA\"\n0,\"1\",2\n0.1,3,\"4\"\n0.2,5,6\n0.3,7,8\n0.4,9,10\n",
        "T,ECG II [mV],EDA\n0,1e0,2\n1e-1,+3,4.\n.2,5,0.6e1\n0.3,7,8\n0.4,9,10\n",
    };
    for (size_t i = 0; i < sizeof texts / sizeof *texts; i++) {
        struct stream_log log = play_text(texts[i], 0);
        cr_assert_eq(log.headers, 1, "text %zu: %s", i, log.complaint);
        expect_values(&log, counted, 10);
        cr_expect_eq(log.own_ns[4], 400 * NS_PER_MS);
        cr_expect_eq(log.garbled, 0);
        stream_log_free(&log);
    }
}

Test(stream_parser, times_in_ms_of_day_and_in_iso)
{
    static const struct {
        const char *name, *times[5];
        int64_t first_ns;
    } forms[] = {
        {"t [ms]", {"250", "350", "450", "550", "650"}, 250 * NS_PER_MS},
        {"time (ms)", {"250", "350.0", "450", "550", "650"}, 250 * NS_PER_MS},
        {"t",
         {"09:41:12.25", "09:41:12.35", "09:41:12.45", "09:41:12.55", "09:41:12.65"},
         34872250 * NS_PER_MS},
        {"time",
         {"2031-05-20T08:55:00.25", "2031-05-20 08:55:00.35", "2031-05-20T08:55:00.45",
          "2031-05-20T08:55:00.55", "2031-05-20T08:55:00.65"},
         1937033700250 * NS_PER_MS},
    };
    for (size_t i = 0; i < sizeof forms / sizeof *forms; i++) {
        struct input input = {0};
        input_put(&input, "%s,a,b\n", forms[i].name);
        for (int k = 0; k < 5; k++)
            input_put(&input, "%s,%d,%d\n", forms[i].times[k], 2 * k + 1, 2 * k + 2);
        struct stream_log log = input_play(&input);
        cr_assert_eq(log.headers, 1, "form %zu: %s", i, log.complaint);
        expect_values(&log, counted, 10);
        for (int k = 0; k < 5; k++)
            cr_expect_eq(log.own_ns[k], forms[i].first_ns + k * 100 * NS_PER_MS);
        cr_expect_eq(log.block_ns * 10, log.blocks * NS_PER_S);
        stream_log_free(&log);
    }
}

Test(stream_parser, a_given_rate_needs_no_time_and_no_header)
{
    static const char *const texts[] = {
        "a [mV],b\n1,2\n3,4\n5,6\n7,8\n9,10\n", "1,2\n3,4\n5,6\n7,8\n9,10\n",
        "1;2,0\n3;4\n5;6\n7;8\n9;10\n", "t,a,b\n0,1,2\n0.5,3,4\n1,5,6\n1.5,7,8\n2,9,10\n"};
    for (size_t i = 0; i < sizeof texts / sizeof *texts; i++) {
        struct stream_log log = play_text(texts[i], 333.333);
        cr_assert_eq(log.headers, 1, "text %zu: %s", i, log.complaint);
        cr_expect_eq(log.block_ns, 3 * NS_PER_S);
        cr_expect_eq(log.blocks, 1000);
        expect_values(&log, counted, 10);
        cr_expect_eq(log.own_ns[1], i == 3 ? 500 * NS_PER_MS : NS_NONE);
        cr_expect_eq(log.garbled, 0);
        cr_expect_str_eq(log.labels[0], i == 1 || i == 2 ? "channel 1" : "a");
        stream_log_free(&log);
    }
}

Test(stream_parser, without_header_and_rate_nothing_is_made_up)
{
    struct stream_log log = play_text("0,1,2\n0.1,3,4\nnonsense\n", 0);
    cr_expect_eq(log.headers, 0);
    cr_expect_eq(log.garbled, 3);
    cr_expect_str_not_empty(log.complaint);
    stream_log_free(&log);
}

/* ---- rows ---- */

Test(stream_parser, line_ends_blank_lines_and_zero_bytes_between_lines)
{
    static const char text[] = "\0\0t,a,b\r\n\r\n0,1,2\r\n\n\n0.1,3,4\0\r\n\0\0\0000.2,5,6\n\0\n"
                               "0.3,7,8\n\r0.4,9,10\n\r";
    struct input input = {0};
    input_put_n(&input, text, sizeof text - 1);
    struct stream_log log = input_play(&input);
    expect_values(&log, counted, 10);
    cr_expect_eq(log.garbled, 0, "%s", log.complaint);
    stream_log_free(&log);
}

Test(stream_parser, missing_samples_are_nan)
{
    static const float want[] = {NAN, 2, 3, NAN, NAN, NAN, 7, NAN, NAN, 10};
    struct stream_log log = play_text("t,a,b\n0,,2\n0.1,3,NaN\n0.2,nan,\n0.3,7,--\n0.4,NA,10\n", 0);
    expect_values(&log, want, 10);
    cr_expect_eq(log.garbled, 0);
    stream_log_free(&log);
}

Test(stream_parser, garbled_rows_are_counted_and_skipped)
{
    static const char *const bad[] = {
        "0.05,1",       "0.05,1,2,3", "0.05,1x,2",        "0.05,1,2 3",  "x0.05,1,2",
        "0.05,1.2.3,4", "0.05;1;2",   "0.05,\"1,2",       "0.05,1,2,",   ",1,2",
        "nan,1,2",      "0.05,--1,2", "0.05,0x10,2",      "0.05,inf,2",  "0,05,1,2",
        "0.05",         "\"",         "0.05,\xC3\x28,10", "\xFF\xFE,1,2"};
    for (size_t i = 0; i < sizeof bad / sizeof *bad; i++) {
        struct input input = {0};
        input_put(&input, "t,a,b\n0,1,2\n%s\n0.1,3,4\n0.2,5,6\n%s\n0.3,7,8\n0.4,9,10\n", bad[i],
                  bad[i]);
        struct stream_log log = input_play(&input);
        cr_assert_eq(log.headers, 1, "'%s'", bad[i]);
        expect_values(&log, counted, 10);
        cr_expect_eq(log.garbled, 2, "'%s': %lld", bad[i], (long long)log.garbled);
        stream_log_free(&log);
    }
}

Test(stream_parser, a_zero_byte_inside_a_row_garbles_it)
{
    static const char text[] = "t,a,b\n0,1,2\n0.0\0005,1,2\n0.1,3,4\n0.2,5,6\n0.3,7,8\n0.4,9,10\n";
    struct input input = {0};
    input_put_n(&input, text, sizeof text - 1);
    struct stream_log log = input_play(&input);
    expect_values(&log, counted, 10);
    cr_expect_eq(log.garbled, 1);
    stream_log_free(&log);
}

/* The longest line that is read, one byte more, and a megabyte. */
Test(stream_parser, long_lines_are_skipped_to_their_end)
{
    static const size_t lengths[] = {65535, 65536, 1 << 20};
    for (size_t i = 0; i < 3; i++) {
        struct input input = {.rate_hz = 10};
        char *line = malloc(lengths[i]);
        cr_assert_not_null(line);
        memset(line, ' ', lengths[i]);
        memcpy(line, "0.1,3,4", 7);
        input_put(&input, "t,a,b\n0,1,2\n");
        input_put_n(&input, line, lengths[i]);
        input_put(&input, "\n0.2,5,6\n0.3,7,8\n0.4,9,10\n0.5,11,12\n");
        free(line);
        struct stream_log log = input_play(&input);
        cr_expect_eq(log.block_count, i == 0 ? 6 : 5);
        cr_expect_eq(log.garbled, i == 0 ? 0 : 1);
        stream_log_free(&log);
    }
}

Test(stream_parser, time_is_delivered_as_it_is)
{
    static const int64_t want[] = {0, 100, 200, 300, 400, 100, 86400200, 86400300, 5, -7000};
    struct stream_log log = play_text("t,a\n0,1\n0.1,2\n0.2,3\n0.3,4\n0.4,5\n0.1,6\n86400.2,7\n"
                                      "86400.3,8\n0.005,9\n-7,10\n",
                                      0);
    cr_assert_eq(log.headers, 1);
    cr_assert_eq(log.block_count, 10);
    for (size_t i = 0; i < 10; i++)
        cr_expect_eq(log.own_ns[i], want[i] * NS_PER_MS);
    stream_log_free(&log);
}

/* ---- changes and breaks ---- */

Test(stream_parser, another_header_changes_the_channels)
{
    struct stream_log log = play_text("t,a,b\n0,1,2\n0.1,3,4\n0.2,5,6\n0.3,7,8\n0.4,9,10\n"
                                      "t;c [mV]\n0;1,5\n0,5;2,5\n1;3,5\n1,5;4,5\n2;5,5\n",
                                      0);
    cr_assert_eq(log.headers, 2);
    cr_assert_eq(log.block_count, 10);
    cr_expect_eq(log.channel_count, 1);
    cr_expect_str_eq(log.labels[0], "c");
    cr_expect_eq(log.values[14], 5.5f);
    cr_expect_eq(log.block_ns, log.blocks / 2 * NS_PER_S);
    cr_expect_eq(log.garbled, 0);
    stream_log_free(&log);
}

/* Rows that wait for their rate are not lost when a header comes. */
Test(stream_parser, another_header_while_the_rate_is_not_known)
{
    struct stream_log log = play_text("t,a\n0,1\n0.1,2\n0.2,3\nt,b\n0,1\n1,2\n2,3\n3,4\n4,5\n", 0);
    cr_assert_eq(log.headers, 2);
    cr_assert_eq(log.block_count, 8);
    cr_expect_eq(log.own_ns[2], 200 * NS_PER_MS);
    cr_expect_eq(log.garbled, 0);
    stream_log_free(&log);
}

Test(stream_parser, a_break_inside_a_line_drops_that_half)
{
    struct input input = {0};
    input_put(&input, "t,a,b\n0,1,2\n0.1,3,4\n0.2,5,6\n0.3,7,8\n0.35,1");
    input_break(&input);
    input_put(&input, "9\n0.4,9,10\n"); /* in the middle of a line, and on without a header */
    input_break(&input);
    input_break(&input);
    input_put(&input, "0.5,1");
    input_break(&input);
    struct stream_log log = input_play(&input);
    cr_assert_eq(log.headers, 1);
    expect_values(&log, counted, 10);
    cr_expect_eq(log.garbled, 3);
    stream_log_free(&log);
}

Test(stream_parser, a_header_again_after_a_break)
{
    struct input input = {.rate_hz = 10};
    input_put(&input, "a,b\n1,2\n3,4\n");
    input_break(&input);
    input_put(&input, "a,b\n5,6\n7,8\n");
    input_break(&input);
    input_put(&input, "9,10\n");
    struct stream_log log = input_play(&input);
    expect_values(&log, counted, 10);
    cr_expect_eq(log.garbled, 0);
    stream_log_free(&log);
}

/* ---- what only looks like a header or a row ---- */

Test(stream_parser, blank_lines_with_blanks_are_no_rows)
{
    static const float want[] = {1, 2, 3};
    struct stream_log log = play_text("a\n1\n   \n2\n\t \r\n3\n", 10);
    expect_values(&log, want, 3);
    cr_expect_eq(log.garbled, 0);
    stream_log_free(&log);
    static const float tabbed[] = {1, 2, NAN, NAN, 3, 4};
    log = play_text("a\tb\n1\t2\n\t\n3\t4\n", 10);
    expect_values(&log, tabbed, 6);
    stream_log_free(&log);
    char blanks[65535];
    struct input input = {.rate_hz = 10};
    memset(blanks, ' ', sizeof blanks);
    input_put_n(&input, blanks, sizeof blanks);
    input_put(&input, "\na\n1\n2\n3\n");
    log = input_play(&input);
    expect_values(&log, want, 3);
    stream_log_free(&log);
}

/* A byte that became a quote hides the rest of the line. */
Test(stream_parser, a_quote_that_is_not_closed_garbles_its_row)
{
    struct stream_log log = play_text("a,b\n1,2\n\"9,8\n9,\"8\n3,4\n9,8\"\n5,6\n7,8\n9,10\n", 10);
    expect_values(&log, counted, 10);
    cr_expect_eq(log.garbled, 3);
    stream_log_free(&log);
}

Test(stream_parser, a_mark_of_byte_order_is_no_part_of_the_header)
{
    struct stream_log log = play_text("\xEF\xBB\xBFt,a\n0,1\n1,2\n2,3\n3,4\n4,5\n", 0);
    cr_assert_eq(log.headers, 1);
    cr_expect_eq(log.block_count, 5);
    cr_expect_eq(log.garbled, 0);
    stream_log_free(&log);
}

/* As makers write micro and degree. */
Test(stream_parser, a_header_in_latin_1)
{
    struct stream_log log = play_text("t,Temp [\xB0"
                                      "C],EDA [\xB5S]\n0,1,2\n1,3,4\n2,5,6\n3,7,8\n4,9,10\n",
                                      0);
    cr_assert_eq(log.headers, 1);
    cr_expect_str_eq(log.units[0], "\xC2\xB0"
                                   "C");
    cr_expect_str_eq(log.units[1], "\xC2\xB5S");
    stream_log_free(&log);
}

Test(stream_parser, labels_that_are_the_same_are_numbered)
{
    struct stream_log log = play_text("a,a,b,a,,\n1,2,3,4,5,6\n1,2,3,4,5,6\n", 10);
    static const char *const want[] = {"a", "a #2", "b", "a #3", "channel 5", "channel 6"};
    cr_assert_eq(log.channel_count, 6);
    for (size_t i = 0; i < 6; i++)
        cr_expect_str_eq(log.labels[i], want[i]);
    stream_log_free(&log);
}

Test(stream_parser, words_of_a_device_are_no_header)
{
    static const char *const words[] = {"READY", "OK;low battery", "lost,electrode,check"};
    static const char *const starts[] = {"", "a,b\n"};
    for (size_t i = 0; i < 6; i++) {
        struct input input = {.rate_hz = 10};
        input_put(&input, "%s\n%s", words[i / 2], starts[i % 2]);
        input_put(&input, "1,2\n3,4\n%s\n5,6\n7,8\n9,10\n", words[i / 2]);
        struct stream_log log = input_play(&input);
        expect_values(&log, counted, 10);
        cr_expect_eq(log.headers, 1);
        cr_expect_eq(log.garbled, 2, "%s: %lld", words[i / 2], (long long)log.garbled);
        stream_log_free(&log);
    }
}

Test(stream_parser, a_garbled_number_alone_in_its_row_is_no_header)
{
    static const char *const bad[] = {"1x3", "-x", ".", "inf", "-inf", "+", "1.2.3", "1 2"};
    static const float want[] = {1, 2, 3};
    for (size_t i = 0; i < sizeof bad / sizeof *bad; i++) {
        struct input input = {.rate_hz = 10};
        input_put(&input, "1\n2\n%s\n3\n", bad[i]);
        struct stream_log log = input_play(&input);
        cr_expect_eq(log.headers, 1, "%s", bad[i]);
        expect_values(&log, want, 3);
        cr_expect_eq(log.garbled, 1);
        stream_log_free(&log);
    }
}

/* A serial line is joined in the middle of a row, which says nothing about how wide rows are. */
Test(stream_parser, half_a_row_before_rows_without_a_header)
{
    static const char *const halves[] = {"2", "", "\xFF\x80", ",2,3", ".5"};
    for (size_t i = 0; i < sizeof halves / sizeof *halves; i++) {
        struct input input = {.rate_hz = 10};
        input_put(&input, "%s\n1,2\n3,4\n5,6\n7,8\n9,10\n", halves[i]);
        struct stream_log log = input_play(&input);
        expect_values(&log, counted, 10);
        cr_expect_eq(log.garbled, *halves[i] ? 1 : 0, "'%s'", halves[i]);
        stream_log_free(&log);
    }
}

Test(stream_parser, a_header_whose_time_is_not_closed_has_none)
{
    struct stream_log log = play_text("t [s,a\n0,1\n1,2\nt,a\n0,1\n1,2\n2,3\n3,4\n4,5\n", 0);
    cr_assert_eq(log.headers, 1);
    cr_expect_eq(log.block_count, 5);
    cr_expect_eq(log.garbled, 3);
    stream_log_free(&log);
}

Test(stream_parser, rows_whose_rate_was_never_known_are_counted)
{
    struct stream_log log = play_text("t,a\n5,1\n5,2\n5,3\nt,b\n0,1\n1,2\n2,3\n3,4\n4,5\n", 0);
    cr_assert_eq(log.headers, 1);
    cr_expect_eq(log.block_count, 5);
    cr_expect_eq(log.garbled, 3);
    stream_log_free(&log);
}

Test(stream_parser, times_that_cannot_be_kept_garble_their_row)
{
    struct stream_log log = play_text("t,a\n0,1\n1,2\n9e9,9\n-9e9,9\n1e300,9\n2,3\n3,4\n4,5\n", 0);
    cr_expect_eq(log.block_count, 5);
    cr_expect_eq(log.garbled, 3);
    stream_log_free(&log);
}

Test(stream_parser, a_rate_that_cannot_be_meant_is_refused)
{
    static const double rates[] = {-1, NAN, INFINITY, 1e300, 1e-9};
    struct stream_sink sink = {0};
    for (size_t i = 0; i < sizeof rates / sizeof *rates; i++) {
        struct stream_parser *parser = NULL;
        struct err err = {0};
        cr_expect_eq(stream_parser_new(rates[i], &sink, &parser, &err), ERR_USAGE, "%g", rates[i]);
        cr_expect_null(parser);
        cr_expect_str_not_empty(err.text);
    }
}

/* More columns than a recording could have. */
Test(stream_parser, a_line_of_too_many_columns_is_garbled)
{
    struct input input = {.rate_hz = 10};
    for (int row = 0; row < 3; row++) {
        for (int i = 0; i < 1026; i++)
            input_put(&input, row == 0 ? "a," : "1,");
        input_put(&input, "\n");
    }
    struct stream_log log = input_play(&input);
    cr_expect_eq(log.headers, 0);
    cr_expect_eq(log.garbled, 3);
    stream_log_free(&log);
}
