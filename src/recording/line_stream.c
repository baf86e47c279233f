/*
 * line_stream.c - lines of numbers as they stream in, taken apart by libcsv. Keeps one line, and
 * the first rows while their rate is not known.
 */
#include <csv.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "recording/csv_columns.h"
#include "recording/stream_parser_impl.h"

enum { LINE_MOST = 64 << 10, HELD_MOST = 64, NO_COLUMN = -1, SHOWN_MOST = 40 };

struct line_stream {
    struct stream_sink sink;
    struct complaints *complaints;
    double rate_hz;

    char *line; /* LINE_MOST bytes */
    size_t length;
    bool too_long; /* the line is being skipped */

    struct csv_parser csv;
    char *fields; /* texts of the line's fields, each terminated; room for LINE_MOST * 2 */
    size_t fields_used;
    const char **field; /* shape (field_count) */
    size_t field_count, field_room;
    bool field_failed;

    struct arena arena; /* of the header */
    bool has_header;
    char delimiter;
    int time_column; /* NO_COLUMN: there is none */
    double time_scale;
    size_t width;
    struct stream_channel *channels;
    size_t channel_count;

    struct str assumed; /* a header line for rows that come without one: "t,ECG [mV]"; "" = none */
    size_t assumed_count;
    size_t assumed_width; /* of the line before, when it could have been such a row */
    double assumed_hz;

    bool rate_known;
    struct line_rate rate;
    float *values;              /* of one row, shape (channel_count) */
    float *held;                /* rows before the rate is known, shape (HELD_MOST, channels) */
    int64_t held_ns[HELD_MOST]; /* and their times */
    size_t held_count;
};

int line_stream_new(double rate_hz, const struct stream_sink *sink, struct complaints *complaints,
                    struct line_stream **out, struct err *err)
{
    struct line_stream *made = calloc(1, sizeof *made);
    if (!made)
        return err_memory(err, "a stream of lines");
    made->sink = *sink;
    made->complaints = complaints;
    made->rate_hz = rate_hz;
    made->line = malloc(LINE_MOST);
    made->fields = malloc(2 * LINE_MOST);
    int code = csv_init(&made->csv, CSV_APPEND_NULL);
    if (!made->line || !made->fields || code != 0) {
        line_stream_free(made);
        return err_memory(err, "a stream of lines");
    }
    *out = made;
    return ERR_OK;
}

void line_stream_free(struct line_stream *lines)
{
    if (!lines)
        return;
    csv_free(&lines->csv);
    arena_free(&lines->arena);
    free(lines->line);
    free(lines->fields);
    free((void *)lines->field);
    free(lines->values);
    free(lines->held);
    str_free(&lines->assumed);
    free(lines);
}

static void put_quoted(struct str *out, const char *text)
{
    str_putc(out, '"');
    for (; *text; text++) {
        if (*text == '"')
            str_putc(out, '"');
        str_putc(out, *text);
    }
    str_putc(out, '"');
}

int line_stream_assume(struct line_stream *lines, const char *const *headers, size_t count,
                       double rate_hz, struct err *err)
{
    str_clear(&lines->assumed);
    str_put(&lines->assumed, "t");
    for (size_t i = 0; i < count; i++) {
        str_putc(&lines->assumed, ',');
        put_quoted(&lines->assumed, headers[i]);
    }
    lines->assumed_count = count;
    lines->assumed_hz = rate_hz;
    bool good = !str_failed(&lines->assumed) && lines->assumed.length < LINE_MOST;
    if (!good)
        lines->assumed_count = 0;
    return good ? ERR_OK : err_memory(err, "the channels");
}

bool line_stream_has_header(const struct line_stream *lines)
{
    return lines->has_header;
}

/* ---- fields ---- */

static void take_field(void *text, size_t length, void *context)
{
    struct line_stream *lines = context;
    struct err err = {0};
    if (lines->fields_used + length + 1 > 2 * LINE_MOST ||
        array_reserve((void **)&lines->field, &lines->field_room, lines->field_count + 1,
                      sizeof *lines->field, &err)) {
        lines->field_failed = true;
        return;
    }
    char *to = lines->fields + lines->fields_used;
    memcpy(to, text, length);
    to[length] = '\0';
    lines->fields_used += length + 1;
    lines->field[lines->field_count++] = to;
}

/* The line's fields by this delimiter; false when it is no line of CSV. */
static bool split(struct line_stream *lines, char delimiter)
{
    lines->fields_used = lines->field_count = 0;
    lines->field_failed = false;
    csv_set_delim(&lines->csv, (unsigned char)delimiter);
    bool good = csv_parse(&lines->csv, lines->line, lines->length, take_field, NULL, lines) ==
                lines->length;
    good = csv_fini(&lines->csv, take_field, NULL, lines) == 0 && good;
    return good && !lines->field_failed && lines->field_count > 0;
}

static char find_delimiter(const struct line_stream *lines)
{
    size_t counts[3] = {0};
    static const char candidates[] = ",;\t";
    for (size_t i = 0; i < lines->length; i++) {
        const char *at = strchr(candidates, lines->line[i]);
        if (at && *at)
            counts[at - candidates]++;
    }
    return counts[2] > 0 ? '\t' : counts[1] > 0 ? ';' : ',';
}

static bool read_number(const struct line_stream *lines, const char *text, double *out)
{
    return lines->delimiter == ',' ? number_parse(text, out) : number_parse_comma(text, out);
}

static bool read_time(const struct line_stream *lines, const char *text, int64_t *out)
{
    double value;
    struct time_arg time;
    if (read_number(lines, text, &value)) {
        *out = (int64_t)llround(value * lines->time_scale);
        return fabs(value * lines->time_scale) < 9e18;
    }
    if (day_time_parse(text, out))
        return true;
    if (!iso_parse(text, &time))
        return false;
    *out = time.ns;
    return true;
}

/* ---- header ---- */

/* A header has words where rows have numbers, and says where the time is, unless a rate does. */
static bool looks_like_header(const struct line_stream *lines)
{
    bool time = false;
    for (size_t i = 0; i < lines->field_count; i++) {
        const char *text = lines->field[i];
        double value;
        if (!*text || csv_text_missing(text) || number_parse_comma(text, &value) ||
            !utf8_valid(text, strlen(text)))
            return false;
        char label[32];
        (void)snprintf(label, sizeof label, "%.*s", (int)strcspn(text, "[("), text);
        size_t end = strlen(label);
        while (end > 0 && label[end - 1] == ' ')
            label[--end] = '\0';
        time = time || csv_time_name(label);
    }
    size_t channels = lines->field_count - (time ? 1 : 0);
    return channels > 0 && (time || lines->rate_hz > 0);
}

static const char *unique_label(struct line_stream *lines, const char *label)
{
    int number = 1;
    for (size_t i = 0; i < lines->channel_count; i++)
        number += strcmp(lines->channels[i].label, label) == 0;
    return number == 1 ? label : arena_printf(&lines->arena, "%s #%d", label, number);
}

static int add_channel(struct line_stream *lines, const char *label, const char *unit,
                       struct err *err)
{
    char why[120];
    struct stream_channel *made = &lines->channels[lines->channel_count];
    const char *name = *label
                           ? unique_label(lines, label)
                           : arena_printf(&lines->arena, "channel %zu", lines->channel_count + 1);
    if (!name)
        return err_memory(err, "a channel");
    *made = (struct stream_channel){.label = name,
                                    .unit = unit,
                                    .role = role_of_label(name, unit, why, sizeof why),
                                    .transducer = "",
                                    .prefilter = "",
                                    .samples = 1};
    lines->channel_count++;
    return ERR_OK;
}

/* Columns of the line as it is split now; `bare`: it is a row, and the columns have no names. */
static int take_columns(struct line_stream *lines, bool bare, struct err *err)
{
    arena_free(&lines->arena);
    lines->channels = arena_alloc(&lines->arena, lines->field_count, sizeof *lines->channels);
    lines->channel_count = 0;
    lines->time_column = NO_COLUMN;
    lines->width = lines->field_count;
    int failed = lines->channels ? ERR_OK : err_memory(err, "the channels");
    for (size_t i = 0; i < lines->field_count && !failed; i++) {
        const char *label = "", *unit = "";
        if (!bare)
            failed = csv_split_header(&lines->arena, lines->field[i], &label, &unit, err);
        if (!failed && lines->time_column == NO_COLUMN && csv_time_name(label)) {
            lines->time_column = (int)i;
            lines->time_scale = ascii_equal(unit, "ms") ? 1e6 : 1e9;
        } else if (!failed) {
            failed = add_channel(lines, label, unit, err);
        }
    }
    return failed;
}

static int tell_header(struct line_stream *lines, struct err *err)
{
    struct stream_header header = {lines->channels, lines->channel_count, lines->rate.block_ns,
                                   lines->rate.blocks};
    lines->rate_known = true;
    return lines->sink.header(lines->sink.context, &header, err);
}

static int begin(struct line_stream *lines, bool bare, struct err *err)
{
    void *values = NULL, *held = NULL;
    int failed = take_columns(lines, bare, err);
    if (!failed)
        failed = array_new(&values, lines->channel_count, sizeof *lines->values, err);
    if (!failed)
        failed = array_new(&held, HELD_MOST * lines->channel_count, sizeof *lines->held, err);
    if (failed) {
        free(values);
        return failed;
    }
    free(lines->values);
    free(lines->held);
    lines->values = values;
    lines->held = held;
    lines->held_count = 0;
    lines->has_header = true;
    lines->rate_known = false;
    double rate_hz = lines->rate_hz;
    if (rate_hz <= 0 && lines->time_column == NO_COLUMN)
        rate_hz = lines->assumed_hz; /* nothing else lets rows without a time in */
    if (rate_hz <= 0)
        return ERR_OK;
    lines->rate = line_rate_of_hz(rate_hz);
    return tell_header(lines, err);
}

/* ---- rows ---- */

static void garbled(struct line_stream *lines, const char *why)
{
    char shown[SHOWN_MOST + 1];
    size_t length = lines->length < SHOWN_MOST ? lines->length : SHOWN_MOST;
    for (size_t i = 0; i < length; i++)
        shown[i] = lines->line[i] >= ' ' && lines->line[i] < 127 ? lines->line[i] : '.';
    shown[length] = '\0';
    complain(lines->complaints, 1, "'%s': %s", shown, why);
}

/* Fills values and *own_ns from the fields; false when one of them is neither number nor missing.
 */
static bool read_row(struct line_stream *lines, int64_t *own_ns)
{
    size_t channel = 0;
    *own_ns = NS_NONE;
    if (lines->field_count != lines->width)
        return false;
    for (size_t i = 0; i < lines->field_count; i++) {
        const char *text = lines->field[i];
        double value = (double)NAN;
        if ((int)i == lines->time_column) {
            if (!read_time(lines, text, own_ns))
                return false;
            continue;
        }
        if (!csv_text_missing(text) && !read_number(lines, text, &value))
            return false;
        lines->values[channel++] = (float)value;
    }
    return true;
}

/* Once the rate is known: the header, then the rows that waited for it. */
static int release(struct line_stream *lines, bool final, struct err *err)
{
    if (!line_rate_of_times(lines->held_ns, lines->held_count, final, &lines->rate)) {
        if (lines->held_count < HELD_MOST)
            return ERR_OK;
        complain(lines->complaints, (int64_t)lines->held_count,
                 "column t does not rise: no rate can be told from it; give one with --rate");
        lines->held_count = 0;
        return ERR_OK;
    }
    int failed = tell_header(lines, err);
    for (size_t i = 0; i < lines->held_count && !failed; i++)
        failed = lines->sink.block(lines->sink.context, lines->held_ns[i],
                                   lines->held + i * lines->channel_count, err);
    lines->held_count = 0;
    return failed;
}

static int put_row(struct line_stream *lines, int64_t own_ns, struct err *err)
{
    if (lines->rate_known)
        return lines->sink.block(lines->sink.context, own_ns, lines->values, err);
    memcpy(lines->held + lines->held_count * lines->channel_count, lines->values,
           lines->channel_count * sizeof *lines->values);
    lines->held_ns[lines->held_count++] = own_ns;
    return release(lines, false, err);
}

/* Are the fields from `first` on numbers, or missing ones? */
static bool all_numbers(const struct line_stream *lines, size_t first)
{
    double value;
    for (size_t i = first; i < lines->field_count; i++) {
        if (!csv_text_missing(lines->field[i]) && !read_number(lines, lines->field[i], &value))
            return false;
    }
    return true;
}

static int another_line(struct line_stream *lines, struct err *err)
{
    int64_t own_ns;
    if (split(lines, lines->delimiter) && read_row(lines, &own_ns))
        return put_row(lines, own_ns, err);
    char delimiter = find_delimiter(lines);
    if (!split(lines, delimiter) || !looks_like_header(lines)) {
        garbled(lines, "not a row of this stream");
        return ERR_OK;
    }
    int failed = lines->rate_known || lines->held_count == 0 ? ERR_OK : release(lines, true, err);
    if (failed || !split(lines, delimiter))
        return failed;
    lines->delimiter = delimiter;
    return begin(lines, false, err);
}

/* Could the line, as it is split, be a row of the channels that are assumed? */
static bool fits_assumed(const struct line_stream *lines)
{
    int64_t time;
    bool timed = lines->field_count == lines->assumed_count + 1;
    if (lines->assumed_count == 0 || (!timed && lines->field_count != lines->assumed_count))
        return false;
    return all_numbers(lines, timed) && (!timed || read_time(lines, lines->field[0], &time));
}

/* Takes the assumed header as if it had come, then the row that is in the line. */
static int begin_assumed(struct line_stream *lines, struct err *err)
{
    bool timed = lines->field_count == lines->assumed_count + 1;
    char delimiter = lines->delimiter;
    size_t skip = timed ? 0 : 2; /* "t," */
    char *row = malloc(lines->length + 1);
    size_t row_length = lines->length;
    if (!row)
        return err_memory(err, "a row");
    memcpy(row, lines->line, row_length);
    lines->length = lines->assumed.length - skip;
    memcpy(lines->line, lines->assumed.text + skip, lines->length);
    bool good = split(lines, ',');
    int failed = good ? begin(lines, false, err) : ERR_OK;
    lines->length = row_length;
    memcpy(lines->line, row, row_length);
    free(row);
    lines->delimiter = delimiter;
    return failed || !good ? failed : another_line(lines, err);
}

static int first_line(struct line_stream *lines, struct err *err)
{
    int64_t own_ns;
    lines->delimiter = find_delimiter(lines);
    if (!split(lines, lines->delimiter)) {
        garbled(lines, "not a line of numbers");
        return ERR_OK;
    }
    if (looks_like_header(lines))
        return begin(lines, false, err);
    lines->time_scale = 1e9;
    /* Half a row may look like a whole one without its time: two of the same width must come. */
    size_t before = lines->assumed_width;
    lines->assumed_width = fits_assumed(lines) ? lines->field_count : 0;
    if (lines->assumed_width > 0 && lines->assumed_width == before)
        return begin_assumed(lines, err);
    if (lines->rate_hz <= 0 || !all_numbers(lines, 0)) {
        garbled(lines, "no header yet");
        return ERR_OK;
    }
    int failed = begin(lines, true, err);
    if (!failed && read_row(lines, &own_ns))
        failed = put_row(lines, own_ns, err);
    return failed;
}

static int end_line(struct line_stream *lines, struct err *err)
{
    size_t start = 0;
    int failed = ERR_OK;
    /* A serial line that wakes up often sends some zero bytes first. */
    while (start < lines->length && lines->line[start] == '\0')
        start++;
    memmove(lines->line, lines->line + start, lines->length - start);
    lines->length -= start;
    while (lines->length > 0 &&
           (lines->line[lines->length - 1] == '\r' || lines->line[lines->length - 1] == '\0'))
        lines->length--;
    if (lines->too_long)
        complain(lines->complaints, 1, "a line longer than %d bytes", LINE_MOST);
    else if (memchr(lines->line, '\0', lines->length))
        garbled(lines, "zero bytes");
    else if (lines->length > 0)
        failed = lines->has_header ? another_line(lines, err) : first_line(lines, err);
    lines->length = 0;
    lines->too_long = false;
    return failed;
}

int line_stream_feed(struct line_stream *lines, const char *bytes, size_t count, struct err *err)
{
    int failed = ERR_OK;
    while (count > 0 && !failed) {
        const char *end = memchr(bytes, '\n', count);
        size_t part = end ? (size_t)(end - bytes) : count;
        if (lines->length + part >= LINE_MOST)
            lines->too_long = true;
        if (lines->too_long) {
            lines->length = 0;
        } else {
            memcpy(lines->line + lines->length, bytes, part);
            lines->length += part;
        }
        if (end)
            failed = end_line(lines, err);
        part += end != NULL;
        bytes += part;
        count -= part;
    }
    return failed;
}

void line_stream_break(struct line_stream *lines)
{
    if (lines->length > 0 || lines->too_long)
        complain(lines->complaints, 1, "broke off in the middle of a line");
    lines->length = 0;
    lines->too_long = false;
}
