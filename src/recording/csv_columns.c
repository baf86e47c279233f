/*
 * csv_columns.c - decoding a CSV or TSV file of signals, gzipped or not, by libcsv. What the times
 * mean for rates and gaps is csv.c's.
 */
#include "recording/csv_columns.h"

#include <csv.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>
#include <zlib.h>

#include "base/array.h"
#include "base/str.h"
#include "recording/reader.h"

/* What one file may unpack to: more is no recording, but a trap or a mistake. */
static const uint64_t unpacked_most = (uint64_t)16 << 30;

enum { PIECE = 1 << 16, CELL_MOST = 64, NO_COLUMN = -1 };

struct parsing {
    struct csv_columns *out;
    struct arena *arena;
    const char *path;
    double rate_hz;
    char delimiter;
    bool header_done, clock_known;
    int time_column;   /* NO_COLUMN: none */
    double time_scale; /* ns a unit of a numeric time */
    size_t cells;      /* in this row */
    size_t width;      /* of the header */
    size_t line;
    const char **header; /* texts of the first row, shape (header_count) */
    size_t header_count, header_room;
    int64_t time_ns, last_day_ns;
    bool time_good;
    int failed;
    struct err *err;
};

static bool parse_number(const struct parsing *parsing, const char *text, double *out)
{
    return parsing->delimiter == ',' ? number_parse(text, out) : number_parse_comma(text, out);
}

/* ---- header ---- */

static int add_column(struct parsing *parsing, size_t index, const char *label, const char *unit)
{
    struct csv_column *column = &parsing->out->columns[parsing->out->column_count++];
    if (!*label)
        label = arena_printf(parsing->arena, "column %zu", index + 1);
    *column = (struct csv_column){.label = label, .unit = unit};
    return label ? ERR_OK : err_memory(parsing->err, "a column");
}

static bool all_numbers(const struct parsing *parsing)
{
    double value;
    for (size_t i = 0; i < parsing->header_count; i++) {
        if (!parse_number(parsing, parsing->header[i], &value))
            return false;
    }
    return parsing->header_count > 0;
}

static int no_time(const struct parsing *parsing)
{
    return err_set(parsing->err, ERR_FORMAT,
                   "%s:1: no time column (t, time, timestamp ...) in the first line; name one, or "
                   "say how many samples a second with --rate HZ",
                   parsing->path);
}

static int end_header(struct parsing *parsing)
{
    bool bare = all_numbers(parsing);
    parsing->width = parsing->header_count;
    parsing->time_column = NO_COLUMN;
    parsing->out->columns =
        arena_alloc(parsing->arena, parsing->width, sizeof *parsing->out->columns);
    if (!parsing->out->columns)
        return err_memory(parsing->err, "the columns");
    for (size_t i = 0; i < parsing->width; i++) {
        const char *label = "", *unit = "";
        int failed = bare ? ERR_OK
                          : csv_split_header(parsing->arena, parsing->header[i], &label, &unit,
                                             parsing->err);
        if (failed)
            return failed;
        if (parsing->time_column == NO_COLUMN && csv_time_name(label)) {
            parsing->time_column = (int)i;
            parsing->time_scale = ascii_equal(unit, "ms") ? 1e6 : 1e9;
        } else {
            failed = add_column(parsing, i, label, unit);
        }
        if (failed)
            return failed;
    }
    if (parsing->time_column == NO_COLUMN && parsing->rate_hz <= 0)
        return no_time(parsing);
    if (parsing->out->column_count == 0)
        return err_set(parsing->err, ERR_FORMAT, "%s:1: a time column and no signal",
                       parsing->path);
    parsing->header_done = true;
    return ERR_OK;
}

static void header_cell(struct parsing *parsing, const char *text, size_t length)
{
    char *copy = recording_text(parsing->arena, (const uint8_t *)text, length);
    if (!copy || array_reserve((void **)&parsing->header, &parsing->header_room,
                               parsing->header_count + 1, sizeof *parsing->header, NULL)) {
        parsing->failed = err_memory(parsing->err, "the columns");
        return;
    }
    parsing->header[parsing->header_count++] = copy;
}

/* ---- cells ---- */

static bool parse_time(struct parsing *parsing, const char *text, int64_t *out)
{
    struct csv_columns *columns = parsing->out;
    double number;
    struct time_arg iso;
    int64_t day;
    bool is_number = parse_number(parsing, text, &number);
    bool is_iso = !is_number && iso_parse(text, &iso);
    bool is_day = !is_number && !is_iso && day_time_parse(text, &day);
    if (!is_number && !is_iso && !is_day)
        return false;
    enum csv_clock clock = is_number ? CSV_SECONDS : is_iso ? CSV_CIVIL : CSV_DAY;
    if (!parsing->clock_known) {
        parsing->clock_known = true;
        columns->clock = clock;
        parsing->last_day_ns = is_day ? day : 0;
    }
    if (clock != columns->clock)
        return false;
    if (is_number && fabs(number) * parsing->time_scale > 9e18)
        return false;
    if (is_day) {
        /* Past midnight the hours begin again. */
        while (day < parsing->last_day_ns - NS_PER_DAY / 2)
            day += NS_PER_DAY;
        parsing->last_day_ns = day;
    }
    *out = is_number ? (int64_t)llround(number * parsing->time_scale) : is_iso ? iso.ns : day;
    return true;
}

static void time_cell(struct parsing *parsing, const char *text)
{
    if (parsing->rate_hz > 0)
        return;
    parsing->time_good = parse_time(parsing, text, &parsing->time_ns);
}

static void value_cell(struct parsing *parsing, size_t index, const char *text)
{
    struct csv_columns *out = parsing->out;
    struct csv_column *column = &out->columns[index];
    double value = (double)NAN;
    if (array_reserve((void **)&column->values, &column->room, out->row_count + 1,
                      sizeof *column->values, parsing->err)) {
        parsing->failed = ERR_MEMORY;
        return;
    }
    if (!csv_text_missing(text)) {
        if (parse_number(parsing, text, &value)) {
            column->numbers++;
        } else {
            value = (double)NAN;
            if (column->texts++ == 0)
                column->first_text_line = parsing->line;
        }
    }
    column->values[out->row_count] = (float)value;
}

static void take_cell(void *data, size_t length, void *context)
{
    struct parsing *parsing = context;
    const char *from = data;
    char text[CELL_MOST];
    if (parsing->failed)
        return;
    if (!parsing->header_done) {
        header_cell(parsing, from ? from : "", length);
        parsing->cells++;
        return;
    }
    while (length > 0 && (*from == ' ' || *from == '\t')) {
        from++;
        length--;
    }
    while (length > 0 && (from[length - 1] == ' ' || from[length - 1] == '\t'))
        length--;
    length = length < CELL_MOST ? length : CELL_MOST - 1;
    if (length > 0)
        memcpy(text, from, length);
    text[length] = '\0';
    size_t at = parsing->cells++;
    if ((int)at == parsing->time_column)
        time_cell(parsing, text);
    else if (at < parsing->width)
        value_cell(parsing,
                   at - (parsing->time_column != NO_COLUMN && (int)at > parsing->time_column),
                   text);
}

/* ---- rows ---- */

static void count(size_t *counter, size_t *first_line, size_t line)
{
    if ((*counter)++ == 0)
        *first_line = line;
}

/* Decides whether the row's time lets it in; keeps the time. */
static bool keep_time(struct parsing *parsing)
{
    struct csv_columns *out = parsing->out;
    if (parsing->rate_hz > 0)
        return true;
    if (!parsing->time_good) {
        count(&out->bad_times, &out->first_bad_time_line, parsing->line);
        return false;
    }
    if (out->row_count > 0 && parsing->time_ns < out->times_ns[out->row_count - 1]) {
        count(&out->backwards, &out->first_backwards_line, parsing->line);
        return false;
    }
    if (array_reserve((void **)&out->times_ns, &out->time_room, out->row_count + 1,
                      sizeof *out->times_ns, parsing->err)) {
        parsing->failed = ERR_MEMORY;
        return false;
    }
    out->times_ns[out->row_count] = parsing->time_ns;
    return true;
}

static void end_row(struct parsing *parsing)
{
    struct csv_columns *out = parsing->out;
    if (parsing->cells != parsing->width)
        count(&out->odd_width, &out->first_odd_width_line, parsing->line);
    bool has_time = parsing->time_column != NO_COLUMN;
    for (size_t at = parsing->cells; at < parsing->width && !parsing->failed; at++) {
        if ((int)at != parsing->time_column)
            value_cell(parsing, at - (has_time && (int)at > parsing->time_column), "");
    }
    if (!parsing->failed && keep_time(parsing))
        out->row_count++;
    parsing->time_good = false;
}

static void take_row(int terminator, void *context)
{
    (void)terminator;
    struct parsing *parsing = context;
    if (!parsing->failed && parsing->cells > 0) {
        if (!parsing->header_done) {
            bool bare = all_numbers(parsing);
            parsing->failed = end_header(parsing);
            /* Without a header the first line is data already. */
            for (size_t i = 0; bare && !parsing->failed && i < parsing->width; i++)
                value_cell(parsing, i, parsing->header[i]);
            if (bare && !parsing->failed)
                end_row(parsing);
        } else {
            end_row(parsing);
        }
    }
    parsing->cells = 0;
}

/* ---- text ---- */

static char choose_delimiter(const char *text, size_t size)
{
    size_t commas = 0, semicolons = 0, tabs = 0;
    for (size_t i = 0; i < size && text[i] != '\n'; i++) {
        commas += text[i] == ',';
        semicolons += text[i] == ';';
        tabs += text[i] == '\t';
    }
    if (tabs > commas && tabs >= semicolons)
        return '\t';
    return semicolons > 0 && semicolons >= commas ? ';' : ',';
}

static int feed(struct parsing *parsing, struct csv_parser *parser, const char *text, size_t size)
{
    for (size_t at = 0; at < size && !parsing->failed;) {
        const char *end = memchr(text + at, '\n', size - at);
        size_t length = end ? (size_t)(end - (text + at)) + 1 : size - at;
        if (csv_parse(parser, text + at, length, take_cell, take_row, parsing) != length)
            return csv_error(parser) == CSV_EPARSE
                       ? err_set(parsing->err, ERR_FORMAT,
                                 "%s:%zu: a quote (\") stands where none may", parsing->path,
                                 parsing->line)
                       : err_memory(parsing->err, parsing->path);
        parsing->line += end != NULL;
        at += length;
    }
    return parsing->failed;
}

/* The first piece, which has the header line: byte-order mark, delimiter. */
static size_t first_piece(struct parsing *parsing, struct csv_parser *parser, const char *text,
                          size_t size)
{
    size_t skip = size >= 3 && memcmp(text, "\xEF\xBB\xBF", 3) == 0 ? 3 : 0;
    parsing->delimiter = choose_delimiter(text + skip, size - skip);
    csv_set_delim(parser, (unsigned char)parsing->delimiter);
    return skip;
}

static int feed_plain(struct parsing *parsing, struct csv_parser *parser, const uint8_t *data,
                      size_t size)
{
    size_t skip = first_piece(parsing, parser, (const char *)data, size);
    return feed(parsing, parser, (const char *)data + skip, size - skip);
}

/* Decompressed a piece at a time: what grows is the decoded columns alone. */
static int feed_gzip(struct parsing *parsing, struct csv_parser *parser, const uint8_t *data,
                     size_t size)
{
    z_stream stream = {0};
    char *piece = malloc(PIECE);
    bool first = true;
    uint64_t unpacked = 0;
    if (!piece || inflateInit2(&stream, 15 + 16) != Z_OK) {
        free(piece);
        return err_memory(parsing->err, parsing->path);
    }
    size_t left = size;
    int code = Z_OK, failed = ERR_OK;
    stream.next_in = (z_const Bytef *)(uintptr_t)data;
    while (!failed && code == Z_OK) {
        if (stream.avail_in == 0) {
            stream.avail_in = left > 1u << 30 ? 1u << 30 : (uInt)left;
            left -= stream.avail_in;
        }
        stream.next_out = (Bytef *)piece;
        stream.avail_out = PIECE;
        code = inflate(&stream, Z_NO_FLUSH);
        size_t got = PIECE - stream.avail_out;
        size_t skip = first && got > 0 ? first_piece(parsing, parser, piece, got) : 0;
        first = first && got == 0;
        failed = feed(parsing, parser, piece + skip, got - skip);
        unpacked += got;
        if (!failed && unpacked > unpacked_most)
            failed = err_set(parsing->err, ERR_FORMAT,
                             "%s: unpacks to more than 16 GiB; unpack and "
                             "cut it first",
                             parsing->path);
        if (code == Z_STREAM_END && (stream.avail_in > 0 || left > 0) && *stream.next_in == 0x1F)
            code = inflateReset(&stream); /* another member follows */
    }
    if (!failed && code != Z_STREAM_END)
        failed = err_set(parsing->err, ERR_FORMAT,
                         "%s: byte %zu: the compressed data is cut off or damaged", parsing->path,
                         (size_t)(stream.next_in - data));
    (void)inflateEnd(&stream);
    free(piece);
    return failed;
}

int csv_columns_read(const uint8_t *data, size_t size, const char *path, double rate_hz,
                     struct arena *arena, struct csv_columns *out, struct err *err)
{
    struct csv_parser parser;
    *out = (struct csv_columns){0};
    struct parsing parsing = {
        .out = out, .arena = arena, .path = path, .rate_hz = rate_hz, .line = 1, .err = err};
    if (csv_init(&parser, CSV_STRICT | CSV_STRICT_FINI) != 0)
        return err_memory(err, path);
    bool gzip = size >= 2 && data[0] == 0x1F && data[1] == 0x8B;
    int failed =
        gzip ? feed_gzip(&parsing, &parser, data, size) : feed_plain(&parsing, &parser, data, size);
    if (!failed && csv_fini(&parser, take_cell, take_row, &parsing) != 0)
        failed = err_set(err, ERR_FORMAT, "%s:%zu: a quote (\") is opened and never closed", path,
                         parsing.line);
    failed = failed ? failed : parsing.failed;
    csv_free(&parser);
    free((void *)parsing.header);
    if (!failed && !parsing.header_done)
        failed =
            err_set(err, ERR_FORMAT, "%s: no line in it; the first must name the columns", path);
    if (failed)
        csv_columns_free(out);
    return failed;
}

void csv_columns_free(struct csv_columns *columns)
{
    for (size_t i = 0; i < columns->column_count; i++)
        free(columns->columns[i].values);
    free(columns->times_ns);
    *columns = (struct csv_columns){0};
}
