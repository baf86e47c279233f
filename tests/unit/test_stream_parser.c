/*
 * test_stream_parser.c - streamed bytes to samples: lines and records, in pieces of any size, with
 * all that goes wrong on a line.
 */
#include <criterion/criterion.h>

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "base/file.h"
#include "base/ns.h"
#include "base/str.h"
#include "recording/edf_writer.h"
#include "recording/recording.h"
#include "recording/stream_parser.h"

/* Everything the sink was told, as one text: two parsers agree when their texts do. */
struct heard {
    struct str text;
    size_t values; /* of a block, by the last header */
    int64_t headers, blocks;
    int64_t block_ns, rows;
    float last[8];
    int64_t last_own_ns;
};

static int hear_header(void *context, const struct stream_header *header, struct err *err)
{
    struct heard *heard = context;
    (void)err;
    heard->headers++;
    heard->values = 0;
    heard->block_ns = header->block_ns;
    heard->rows = header->blocks;
    str_putf(&heard->text, "H %lld/%lld", (long long)header->block_ns, (long long)header->blocks);
    for (size_t i = 0; i < header->channel_count; i++) {
        const struct stream_channel *c = &header->channels[i];
        str_putf(&heard->text, " %s[%s]%s x%d %g..%g %d..%d", c->label, c->unit, role_name(c->role),
                 c->samples, c->physical_min, c->physical_max, c->digital_min, c->digital_max);
        heard->values += (size_t)c->samples;
    }
    str_putc(&heard->text, '\n');
    return ERR_OK;
}

static int hear_block(void *context, int64_t own_ns, const float *samples, struct err *err)
{
    struct heard *heard = context;
    (void)err;
    cr_assert_gt(heard->headers, 0, "a block before any header");
    heard->blocks++;
    heard->last_own_ns = own_ns;
    str_putf(&heard->text, "B %lld", (long long)own_ns);
    for (size_t i = 0; i < heard->values; i++) {
        str_putf(&heard->text, " %.9g", (double)samples[i]);
        if (i < 8)
            heard->last[i] = samples[i];
    }
    str_putc(&heard->text, '\n');
    return ERR_OK;
}

static struct stream_parser *parser_on(struct heard *heard, double rate_hz)
{
    struct stream_parser *parser = NULL;
    struct err err = {0};
    const struct stream_sink sink = {hear_header, hear_block, heard};
    cr_assert_eq(stream_parser_new(rate_hz, &sink, &parser, &err), 0, "%s", err.text);
    return parser;
}

static void feed(struct stream_parser *parser, const void *bytes, size_t count)
{
    struct err err = {0};
    cr_assert_eq(stream_parser_feed(parser, bytes, count, &err), 0, "%s", err.text);
}

/* All at once; then by single bytes and by random pieces, which must say the same. */
static int64_t parse(const void *bytes, size_t count, double rate_hz, struct heard *heard)
{
    struct stream_parser *parser = parser_on(heard, rate_hz);
    feed(parser, bytes, count);
    int64_t garbled = stream_parser_garbled(parser);
    stream_parser_free(parser);
    uint32_t seed = 1;
    for (int round = 0; round < 4; round++) {
        struct heard again = {0};
        parser = parser_on(&again, rate_hz);
        for (size_t at = 0; at < count;) {
            seed = seed * 1664525u + 1013904223u;
            size_t part = round == 0 ? 1 : 1 + (seed >> 16) % 300;
            part = part < count - at ? part : count - at;
            feed(parser, (const char *)bytes + at, part);
            at += part;
        }
        cr_expect_str_eq(str_text(&again.text), str_text(&heard->text), "round %d", round);
        cr_expect_eq(stream_parser_garbled(parser), garbled);
        stream_parser_free(parser);
        str_free(&again.text);
    }
    return garbled;
}

static int64_t parse_text(const char *text, double rate_hz, struct heard *heard)
{
    return parse(text, strlen(text), rate_hz, heard);
}

/* ---- lines ---- */

Test(stream_parser, lines_as_documented)
{
    struct heard heard = {0};
    int64_t garbled = parse_text("t,ECG II [mV],EDA [uS]\n"
                                 "0,0.5,3\n0.1,0.75,3.5\r\n0.2,,NaN\n0.3,nan,4\n0.4,1,5\n",
                                 0, &heard);
    cr_expect_eq(garbled, 0);
    cr_expect_str_eq(str_text(&heard.text),
                     "H 1000000000/10 ECG II[mV]ecg x1 0..0 0..0 EDA[uS]eda x1 0..0 0..0\n"
                     "B 0 0.5 3\nB 100000000 0.75 3.5\nB 200000000 nan nan\nB 300000000 nan 4\n"
                     "B 400000000 1 5\n");
    str_free(&heard.text);
}

Test(stream_parser, delimiters_and_decimal_commas)
{
    struct heard heard = {0};
    cr_expect_eq(
        parse_text("time;RESP (Ohm)\n0,0;1,5\n0,1;2,5\n0,2;3,5\n0,3;4\n0,4;-5,25\n", 0, &heard), 0);
    cr_expect_eq(heard.rows, 10);
    cr_expect_float_eq(heard.last[0], -5.25, 0);
    str_clear(&heard.text);
    cr_expect_eq(parse_text("t\ta [1]\n0\t1\n1\t2\n2\t3\n3\t4\n4\t5\n", 0, &heard), 0);
    cr_expect_eq(heard.rows, 1);
    cr_expect_eq(heard.block_ns, NS_PER_S);
    str_free(&heard.text);
}

Test(stream_parser, times_of_day_and_dates)
{
    struct heard heard = {0};
    cr_expect_eq(parse_text("t,a\n09:00:00.0,1\n09:00:00.5,2\n09:00:01.0,3\n09:00:01.5,4\n"
                            "09:00:02.0,5\n",
                            0, &heard),
                 0);
    cr_expect_eq(heard.rows, 2);
    cr_expect_eq(heard.last_own_ns, (9 * 3600 + 2) * NS_PER_S);
    str_clear(&heard.text);
    cr_expect_eq(parse_text("t [ms],a\n0,1\n100,2\n200,3\n300,4\n400,5\n", 0, &heard), 0);
    cr_expect_eq(heard.rows, 10);
    str_free(&heard.text);
}

Test(stream_parser, rates_from_times)
{
    static const struct {
        double rate_hz;
        int decimals; /* of t */
        int64_t block_ns, blocks;
    } cases[] = {{1, 0, NS_PER_S, 1},         {32, 3, NS_PER_S, 32},
                 {50, 3, NS_PER_S, 50},       {125, 3, NS_PER_S, 125},
                 {250, 3, NS_PER_S, 250},     {256, 3, NS_PER_S, 256},
                 {300, 3, NS_PER_S, 300},     {1000.0 / 3, 6, 3 * NS_PER_S, 1000},
                 {500, 3, NS_PER_S, 500},     {1000, 3, NS_PER_S, 1000},
                 {0.2, 1, 5 * NS_PER_S, 1},   {2048, 6, NS_PER_S, 2048},
                 {62.5, 3, 2 * NS_PER_S, 125}};
    for (size_t i = 0; i < sizeof cases / sizeof *cases; i++) {
        struct heard heard = {0};
        struct str lines = {0};
        str_put(&lines, "t,a\n");
        for (int row = 0; row < 100; row++)
            str_putf(&lines, "%.*f,%d\n", cases[i].decimals, row / cases[i].rate_hz, row);
        cr_expect_eq(parse_text(str_text(&lines), 0, &heard), 0);
        cr_expect_eq(heard.block_ns, cases[i].block_ns, "%g Hz: %lld ns for %lld", cases[i].rate_hz,
                     (long long)heard.block_ns, (long long)heard.rows);
        cr_expect_eq(heard.rows, cases[i].blocks, "%g Hz", cases[i].rate_hz);
        cr_expect_eq(heard.blocks, 100, "no row is lost while the rate is not known");
        str_free(&lines);
        str_free(&heard.text);
    }
}

Test(stream_parser, a_given_rate_needs_no_time_and_no_header)
{
    struct heard heard = {0};
    cr_expect_eq(parse_text("1,2\n3,4\n", 100, &heard), 0);
    cr_expect_str_eq(str_text(&heard.text),
                     "H 1000000000/100 channel 1[]none x1 0..0 0..0 channel 2[]none x1 0..0 "
                     "0..0\nB -9223372036854775808 1 2\nB -9223372036854775808 3 4\n");
    str_clear(&heard.text);
    cr_expect_eq(parse_text("ABP [mmHg]\n80\n81\n", 125, &heard), 0);
    cr_expect_eq(heard.rows, 125);
    str_free(&heard.text);
}

Test(stream_parser, what_is_garbled_is_counted_and_the_rest_goes_on)
{
    static const char zero[] = "0.6,7\0,8\n0.7,9,10\n\0\0\0000.8,11,12\n";
    struct heard heard = {0};
    struct str lines = {0};
    str_put(&lines, "garbage\n12,13\nt,a,b\n0,1,2\n0.1,3\n0.2,x4,5\n0.3,1,2,3\n\n \n\"0.4,5\n"
                    "0.1,5,6\n0.2,5,6\n0.3,5,6\n0.4,5,6\n0.5,5,6\n");
    str_put_n(&lines, zero, sizeof zero - 1);
    for (int i = 0; i < 1 << 20; i++)
        str_putc(&lines, '7');
    str_put(&lines, "\n0.9,13,14\n");
    int64_t garbled = parse(lines.text, lines.length, 0, &heard);
    /* before the header 2; short, letter, long, blank, quote; a zero byte within; the long line */
    cr_expect_eq(garbled, 9);
    cr_expect_eq(heard.blocks, 9);
    cr_expect_float_eq(heard.last[1], 14, 0);
    str_free(&lines);
    str_free(&heard.text);
}

Test(stream_parser, another_header_and_time_that_jumps)
{
    struct heard heard = {0};
    struct str lines = {0};
    str_put(&lines, "t,a\n");
    for (int i = 0; i < 10; i++)
        str_putf(&lines, "%.2f,%d\n", i / 10.0, i);
    str_put(&lines, "86400,1\n-5,2\n5,3\n");
    str_put(&lines, "t,a,c [mV]\n");
    for (int i = 0; i < 10; i++)
        str_putf(&lines, "%.2f,%d,1\n", i / 10.0, i);
    cr_expect_eq(parse_text(str_text(&lines), 0, &heard), 0);
    cr_expect_eq(heard.headers, 2);
    cr_expect_eq(heard.blocks, 23);
    cr_expect(strstr(str_text(&heard.text), "B 86400000000000 1\nB -5000000000 2\nB 5000000000 3"));
    str_free(&lines);
    str_free(&heard.text);
}

Test(stream_parser, a_broken_connection_goes_on_in_the_middle)
{
    struct heard heard = {0};
    struct stream_parser *parser = parser_on(&heard, 0);
    const char *first = "t,a\n0,1\n0.1,2\n0.2,3\n0.3,4\n0.4,5\n0.5";
    const char *later = "8,17\n1.9,18\n";
    feed(parser, first, strlen(first));
    stream_parser_break(parser);
    feed(parser, later, strlen(later));
    cr_expect_eq(heard.headers, 1);
    cr_expect_eq(heard.blocks, 7, "half a line was dropped; what came next may be half a line too");
    cr_expect_eq(stream_parser_garbled(parser), 1);
    stream_parser_free(parser);
    str_free(&heard.text);
}

/* A device that sends its header only when it is switched on, joined in the middle. */
Test(stream_parser, a_header_that_is_known_from_before_is_assumed)
{
    static const char *const known[] = {"ECG II [mV]", "a, \"b\" [1]"};
    static const char *const rows[] = {"8,1\n0,0,0\n0.1,1,2\n0.2,3,4\n0.3,5,6\n0.4,7,8\n0.5,9,10\n",
                                       "4;1\n5;1,5\n6;2,5\n"};
    struct err err = {0};
    for (int i = 0; i < 2; i++) {
        struct heard heard = {0};
        struct stream_parser *parser = parser_on(&heard, 0);
        cr_assert_eq(stream_parser_assume(parser, known, 2, 250, &err), 0, "%s", err.text);
        feed(parser, rows[i], strlen(rows[i]));
        cr_expect_eq(heard.headers, 1);
        cr_expect(strstr(str_text(&heard.text), " ECG II[mV]ecg"), "%s", str_text(&heard.text));
        cr_expect(strstr(str_text(&heard.text), " a, \"b\"[1]"), "%s", str_text(&heard.text));
        cr_expect_eq(heard.rows, i == 0 ? 10 : 250);
        cr_expect_eq(heard.blocks, i == 0 ? 5 : 2);
        cr_expect_float_eq(heard.last[1], i == 0 ? 10 : 2.5, 0);
        stream_parser_free(parser);
        str_free(&heard.text);
    }
}

/* ---- records ---- */

static char folder[] = "/tmp/incisura-parser-XXXXXX";

static void *slurp(const char *path, size_t *size)
{
    struct mapped mapped;
    struct err err = {0};
    cr_assert_eq(disk_files.map(&disk_files, path, &mapped, &err), 0, "%s", err.text);
    void *copy = malloc(mapped.size);
    cr_assert_not_null(copy);
    memcpy(copy, mapped.data, mapped.size);
    *size = mapped.size;
    disk_files.unmap(&disk_files, &mapped);
    return copy;
}

enum { RECORDS = 6, FAST = 50, SLOW = 5 };

/* A file of two rates with a gap; its path in `path`. */
static void write_file(bool bdf, const char *label, char path[80])
{
    const struct edf_channel_spec channels[] = {{label, "mV", "pads", "", -5, 5, 0, 0, FAST},
                                                {"EDA", "uS", "", "", 0, 40, 0, 0, SLOW}};
    const struct edf_spec spec = {.bdf = bdf,
                                  .discontinuous = true,
                                  .start_civil_ns = 1000 * NS_PER_S + 250 * NS_PER_MS,
                                  .record_ns = 100 * NS_PER_MS,
                                  .channels = channels,
                                  .channel_count = 2};
    struct edf_writer *writer = NULL;
    struct err err = {0};
    float samples[FAST + SLOW];
    (void)snprintf(path, 80, "%s/%s.edf", folder, label);
    cr_assert_eq(edf_writer_open(path, &spec, &writer, &err), 0, "%s", err.text);
    for (int r = 0; r < RECORDS; r++) {
        for (int i = 0; i < FAST + SLOW; i++)
            samples[i] = (float)(i < FAST ? sin(r + i * 0.1) : 10 + r);
        int64_t onset = r * 100 * NS_PER_MS + (r >= 3 ? 7 * NS_PER_S : 0);
        cr_assert_eq(edf_writer_record(writer, onset, samples, &err), 0, "%s", err.text);
    }
    cr_assert_eq(edf_writer_close(writer, &err), 0, "%s", err.text);
}

/* The stream gives what the file's reader gives. */
static void check_against_file(const char *path, const struct heard *heard)
{
    struct recording *recording = NULL;
    struct err err = {0};
    float fast[RECORDS * FAST], slow[RECORDS * SLOW];
    struct heard said = {0};
    cr_assert_eq(recording_open(path, NULL, &recording, &err), 0, "%s", err.text);
    cr_assert_eq(recording_read(recording, 0, 0, RECORDS * FAST, fast, &err), 0);
    cr_assert_eq(recording_read(recording, 1, 0, RECORDS * SLOW, slow, &err), 0);
    const struct channel *channel = &recording_info(recording)->channels[0];
    for (int r = 0; r < RECORDS; r++) {
        size_t run = run_of_sample(channel->runs, channel->run_count, r * FAST);
        int64_t onset = run_time_ns(&channel->runs[run], r * FAST);
        /* The file's own time counts from its start; the stream's onset holds the fraction. */
        str_putf(&said.text, "B %lld", (long long)(onset + 250 * NS_PER_MS));
        for (int i = 0; i < FAST; i++)
            str_putf(&said.text, " %.9g", (double)fast[r * FAST + i]);
        for (int i = 0; i < SLOW; i++)
            str_putf(&said.text, " %.9g", (double)slow[r * SLOW + i]);
        str_putc(&said.text, '\n');
    }
    const char *blocks = strchr(str_text(&heard->text), '\n') + 1;
    cr_expect_str_eq(blocks, str_text(&said.text));
    recording_close(recording);
    str_free(&said.text);
}

static void make_folder(void)
{
    cr_assert_not_null(mkdtemp(folder));
}

static void remove_folder(void)
{
    char command[128];
    (void)snprintf(command, sizeof command, "rm -rf %s", folder);
    cr_expect_eq(system(command), 0);
}

TestSuite(stream_records, .init = make_folder, .fini = remove_folder);

Test(stream_records, are_what_the_files_reader_reads)
{
    for (int bdf = 0; bdf < 2; bdf++) {
        char path[80];
        size_t size;
        struct heard heard = {0};
        write_file(bdf, bdf ? "ECG B" : "ECG E", path);
        void *bytes = slurp(path, &size);
        cr_expect_eq(parse(bytes, size, 0, &heard), 0);
        cr_expect_eq(heard.headers, 1);
        check_against_file(path, &heard);
        free(bytes);
        str_free(&heard.text);
    }
}

Test(stream_records, another_header_begins_anew)
{
    char first[80], second[80];
    size_t a, b;
    struct heard heard = {0};
    write_file(true, "ECG A", first);
    write_file(true, "ECG B", second);
    uint8_t *one = slurp(first, &a), *two = slurp(second, &b);
    uint8_t *both = malloc(a + b);
    cr_assert_not_null(both);
    memcpy(both, one, a);
    memcpy(both + a, two, b);
    cr_expect_eq(parse(both, a + b, 0, &heard), 0);
    cr_expect_eq(heard.headers, 2);
    cr_expect_eq(heard.blocks, 2 * RECORDS);
    free(one);
    free(two);
    free(both);
    str_free(&heard.text);
}

Test(stream_records, lost_bytes_are_skipped_up_to_the_next_header)
{
    char path[80];
    size_t size;
    struct heard heard = {0};
    write_file(true, "ECG", path);
    uint8_t *bytes = slurp(path, &size);
    size_t header = 256 * 4, record = (size - header) / RECORDS, hole = header + record + 10;
    uint8_t *broken = malloc(2 * size);
    cr_assert_not_null(broken);
    memcpy(broken, bytes, hole); /* record 1 loses 5 bytes */
    memcpy(broken + hole, bytes + hole + 5, size - hole - 5);
    memcpy(broken + size - 5, bytes, size);
    int64_t garbled = parse(broken, 2 * size - 5, 0, &heard);
    cr_expect_gt(garbled, 0);
    cr_expect_eq(heard.headers, 2);
    /* Samples of the broken record cannot be told from good ones: its onset can, one later. */
    cr_expect(heard.blocks >= 1 + RECORDS && heard.blocks <= 2 + RECORDS, "%d blocks",
              (int)heard.blocks);
    free(bytes);
    free(broken);
    str_free(&heard.text);
}

Test(stream_records, a_break_in_a_record_then_a_header)
{
    char path[80];
    size_t size;
    struct heard heard = {0};
    struct stream_parser *parser = parser_on(&heard, 0);
    write_file(false, "ECG", path);
    uint8_t *bytes = slurp(path, &size);
    feed(parser, bytes, size - 7);
    stream_parser_break(parser);
    cr_expect_gt(stream_parser_garbled(parser), 0);
    feed(parser, bytes, size);
    cr_expect_eq(heard.headers, 2);
    cr_expect_eq(heard.blocks, 2 * RECORDS - 1);
    stream_parser_free(parser);
    free(bytes);
    str_free(&heard.text);
}

Test(stream_records, headers_that_cannot_be_meant_are_skipped)
{
    char path[80];
    size_t size;
    write_file(true, "ECG", path);
    uint8_t *bytes = slurp(path, &size);
    static const struct {
        size_t at;
        const char *text;
    } wrong[] = {{252, "0   "}, {252, "9999"}, {252, "x   "}, {244, "0       "}, {244, "-1      "}};
    for (size_t i = 0; i < sizeof wrong / sizeof *wrong; i++) {
        struct heard heard = {0};
        uint8_t *both = malloc(2 * size);
        cr_assert_not_null(both);
        memcpy(both, bytes, size);
        memcpy(both + wrong[i].at, wrong[i].text, strlen(wrong[i].text));
        memcpy(both + size, bytes, size);
        cr_expect_gt(parse(both, 2 * size, 0, &heard), 0, "%s", wrong[i].text);
        cr_expect_eq(heard.headers, 1, "%zu", i);
        cr_expect_eq(heard.blocks, RECORDS, "%zu", i);
        free(both);
        str_free(&heard.text);
    }
    free(bytes);
}
