/*
 * line_stream.c - lines of numbers as they stream in, taken apart by libcsv. Keeps one line, and
 * the first rows while their rate is not known.
 */
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "recording/csv_columns.h"
#include "recording/line_stream_impl.h"

enum { SHOWN_MOST = 40, FIELDS_MOST = STREAM_CHANNELS_MOST + 1 };

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
    made->waiting.text = malloc(LINE_MOST);
    made->fields = malloc(2 * LINE_MOST);
    made->field = malloc(FIELDS_MOST * sizeof *made->field);
    int code = csv_init(&made->csv, CSV_APPEND_NULL);
    if (!made->line || !made->waiting.text || !made->fields || !made->field || code != 0) {
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
    free(lines->waiting.text);
    free(lines->fields);
    free((void *)lines->field);
    free(lines->values);
    free(lines->held);
    free(lines);
}

bool line_stream_has_header(const struct line_stream *lines)
{
    return lines->has_header;
}

/* ---- fields ---- */

static void take_field(void *text, size_t length, void *context)
{
    struct line_stream *lines = context;
    if (lines->fields_used + length + 1 > 2 * LINE_MOST || lines->field_count == FIELDS_MOST) {
        lines->field_failed = true;
        return;
    }
    char *to = lines->fields + lines->fields_used;
    memcpy(to, text, length);
    to[length] = '\0';
    lines->fields_used += length + 1;
    lines->field[lines->field_count++] = to;
}

/* A quote that is not closed hides what was between: libcsv would close it. */
static bool quotes_close(const char *text, size_t length)
{
    size_t quotes = 0;
    const char *end = text + length;
    while ((text = memchr(text, '"', (size_t)(end - text)))) {
        quotes++;
        text++;
    }
    return quotes % 2 == 0;
}

/* A line's fields by this delimiter; false when it is no line of CSV. */
static bool split(struct line_stream *lines, const char *text, size_t length, char delimiter)
{
    lines->fields_used = lines->field_count = 0;
    lines->field_failed = false;
    csv_set_delim(&lines->csv, (unsigned char)delimiter);
    bool good = csv_parse(&lines->csv, text, length, take_field, NULL, lines) == length;
    good = csv_fini(&lines->csv, take_field, NULL, lines) == 0 && good;
    return good && !lines->field_failed && lines->field_count > 0 && quotes_close(text, length);
}

static bool split_line(struct line_stream *lines, char delimiter)
{
    return split(lines, lines->line, lines->length, delimiter);
}

static bool split_waiting(struct line_stream *lines)
{
    const struct waiting_line *waiting = &lines->waiting;
    return split(lines, waiting->text, waiting->length, waiting->delimiter);
}

static char find_delimiter(const struct line_stream *lines)
{
    static const char candidates[] = "\t;";
    for (size_t i = 0; candidates[i]; i++) {
        if (memchr(lines->line, candidates[i], lines->length))
            return candidates[i];
    }
    return ',';
}

static bool read_number(char delimiter, const char *text, double *out)
{
    return delimiter == ',' ? number_parse(text, out) : number_parse_comma(text, out);
}

/* Times whose differences an int64_t holds: 140 years to either side. */
static bool read_time(char delimiter, double scale, const char *text, int64_t *out)
{
    double value;
    struct time_arg time;
    if (read_number(delimiter, text, &value)) {
        if (fabs(value * scale) > 4.4e18)
            return false;
        *out = llround(value * scale);
        return true;
    }
    if (day_time_parse(text, out))
        return true;
    if (!iso_parse(text, &time) || llabs(time.ns) > 4400000000 * NS_PER_S)
        return false;
    *out = time.ns;
    return true;
}

/* ---- header ---- */

static int tell_header(struct line_stream *lines, struct err *err)
{
    struct stream_header header = {lines->channels, lines->channel_count, lines->rate.block_ns,
                                   lines->rate.blocks};
    lines->rate_known = true;
    return lines->sink.header(lines->sink.context, &header, err);
}

/* The waiting line, as it is split now, is the header. */
static int begin(struct line_stream *lines, struct err *err)
{
    const struct waiting_line *waiting = &lines->waiting;
    void *values = NULL, *held = NULL;
    lines->has_header = false; /* should memory run out half way, rows must not go on */
    int failed = line_header_take(lines, waiting->what == WAITS_ROW, waiting->time_column, err);
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
    lines->delimiter = waiting->delimiter;
    lines->has_header = true;
    lines->rate_known = false;
    if (lines->rate_hz <= 0)
        return ERR_OK;
    lines->rate = line_rate_of_hz(lines->rate_hz);
    return tell_header(lines, err);
}

/* ---- rows ---- */

static void garbled(struct line_stream *lines, const char *text, size_t length, const char *why)
{
    char shown[SHOWN_MOST + 1];
    length = length < SHOWN_MOST ? length : SHOWN_MOST;
    for (size_t i = 0; i < length; i++)
        shown[i] = text[i] >= ' ' && text[i] < 127 ? text[i] : '.';
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
            if (!read_time(lines->delimiter, lines->time_scale, text, own_ns))
                return false;
            continue;
        }
        if (!csv_text_missing(text) && !read_number(lines->delimiter, text, &value))
            return false;
        lines->values[channel++] = (float)value;
    }
    return true;
}

/* Once the rate is known: the header, then the rows that waited for it. */
static int release(struct line_stream *lines, bool final, struct err *err)
{
    if (!line_rate_of_times(lines->held_ns, lines->held_count, final, &lines->rate)) {
        if (lines->held_count < HELD_MOST && !final)
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

/* ---- which line is what ---- */

/* Is the line a row by its fields: so many, and all of them numbers, missing, or the time? */
static bool fits(const struct line_stream *lines, char delimiter, size_t width, int time_column)
{
    double value;
    int64_t time_ns;
    if (lines->field_count != width)
        return false;
    for (size_t i = 0; i < width; i++) {
        const char *text = lines->field[i];
        bool good = (int)i == time_column
                        ? read_time(delimiter, 1e9, text, &time_ns)
                        : csv_text_missing(text) || read_number(delimiter, text, &value);
        if (!good)
            return false;
    }
    return true;
}

static bool fits_waiting(struct line_stream *lines)
{
    const struct waiting_line *waiting = &lines->waiting;
    return waiting->what != WAITS_NOTHING && split_line(lines, waiting->delimiter) &&
           fits(lines, waiting->delimiter, waiting->width, waiting->time_column);
}

static void drop_waiting(struct line_stream *lines)
{
    if (lines->waiting.what != WAITS_NOTHING)
        garbled(lines, lines->waiting.text, lines->waiting.length, "no row of it followed");
    lines->waiting.what = WAITS_NOTHING;
}

/* A device says other words than its header, and a connection is joined in the middle of a row:
 * whether a line begins another header is only believed once a row follows that has its columns. */
static void wait_for_row(struct line_stream *lines, bool header, char delimiter, int time_column)
{
    struct waiting_line *waiting = &lines->waiting;
    bool same = waiting->what == WAITS_HEADER && header && waiting->length == lines->length &&
                memcmp(waiting->text, lines->line, lines->length) == 0;
    if (!same)
        drop_waiting(lines);
    waiting->what = header ? WAITS_HEADER : WAITS_ROW;
    memcpy(waiting->text, lines->line, lines->length);
    waiting->length = lines->length;
    waiting->delimiter = delimiter;
    waiting->width = lines->field_count;
    waiting->time_column = time_column;
}

static int put_line(struct line_stream *lines, struct err *err)
{
    int64_t own_ns;
    if (read_row(lines, &own_ns))
        return put_row(lines, own_ns, err);
    garbled(lines, lines->line, lines->length, "not a row of this stream");
    return ERR_OK;
}

/* The line is a row of the one that waits, which is a header then. */
static int believe(struct line_stream *lines, struct err *err)
{
    int failed = lines->rate_known || lines->held_count == 0 ? ERR_OK : release(lines, true, err);
    if (!failed && split_waiting(lines))
        failed = begin(lines, err);
    if (!failed && lines->waiting.what == WAITS_ROW)
        failed = put_line(lines, err);
    lines->waiting.what = WAITS_NOTHING;
    return failed || !split_line(lines, lines->delimiter) ? failed : put_line(lines, err);
}

static int take_line(struct line_stream *lines, struct err *err)
{
    int64_t own_ns;
    int time_column;
    if (fits_waiting(lines))
        return believe(lines, err);
    if (lines->has_header && split_line(lines, lines->delimiter) && read_row(lines, &own_ns)) {
        drop_waiting(lines);
        return put_row(lines, own_ns, err);
    }
    char delimiter = find_delimiter(lines);
    bool good = split_line(lines, delimiter);
    if (good && line_header_looks(lines, &time_column))
        wait_for_row(lines, true, delimiter, time_column);
    else if (good && !lines->has_header && lines->rate_hz > 0 &&
             lines->field_count <= STREAM_CHANNELS_MOST &&
             fits(lines, delimiter, lines->field_count, NO_COLUMN))
        wait_for_row(lines, false, delimiter, NO_COLUMN);
    else
        garbled(lines, lines->line, lines->length,
                lines->has_header ? "not a row of this stream" : "no header yet");
    return ERR_OK;
}

/* Not where tabs delimit: such a row is one of missing samples. */
static bool is_blank(const struct line_stream *lines)
{
    bool tabs = lines->has_header && lines->delimiter == '\t';
    for (size_t i = 0; i < lines->length; i++) {
        if (lines->line[i] != ' ' && lines->line[i] != '\r' && (lines->line[i] != '\t' || tabs))
            return false;
    }
    return true;
}

/* Drops what is around the text: zero bytes that a waking serial line sends, a mark of byte order,
 * the line's end. */
static void trim(struct line_stream *lines)
{
    size_t start = 0;
    while (start < lines->length && lines->line[start] == '\0')
        start++;
    if (lines->length - start >= 3 && memcmp(lines->line + start, "\xEF\xBB\xBF", 3) == 0)
        start += 3;
    memmove(lines->line, lines->line + start, lines->length - start);
    lines->length -= start;
    while (lines->length > 0 &&
           (lines->line[lines->length - 1] == '\r' || lines->line[lines->length - 1] == '\0'))
        lines->length--;
}

static int end_line(struct line_stream *lines, struct err *err)
{
    int failed = ERR_OK;
    trim(lines);
    if (lines->too_long)
        complain(lines->complaints, 1, "a line longer than %d bytes", LINE_MOST);
    else if (memchr(lines->line, '\0', lines->length))
        garbled(lines, lines->line, lines->length, "zero bytes");
    else if (!is_blank(lines))
        failed = take_line(lines, err);
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

void line_stream_forget(struct line_stream *lines)
{
    drop_waiting(lines);
    if (lines->held_count > 0)
        complain(lines->complaints, (int64_t)lines->held_count,
                 "records came before the rate of these rows could be told");
    lines->held_count = 0;
    lines->has_header = false;
}
