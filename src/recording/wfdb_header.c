/*
 * wfdb_header.c - reading a WFDB header line by line. Opens no signal file.
 */
#include "recording/wfdb_header.h"

#include <ctype.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "base/ns.h"
#include "base/str.h"
#include "recording/reader.h"

enum { LINE_MOST = 1024, COUNT_MOST = 10000, FIELDS_MOST = 9 };

struct reading {
    const char *at, *end, *path;
    size_t line;
    char text[LINE_MOST];
    struct arena *arena;
    struct err *err;
};

static int refuse(const struct reading *reading, const char *what, const char *value)
{
    return err_set(reading->err, ERR_FORMAT, "%s:%zu: %s '%.40s'; the header is damaged",
                   reading->path, reading->line, what, value);
}

/* The next line that is neither a comment nor blank; false at the end. */
static bool next_line(struct reading *reading)
{
    while (reading->at < reading->end) {
        size_t left = (size_t)(reading->end - reading->at);
        const char *newline = memchr(reading->at, '\n', left);
        size_t length = newline ? (size_t)(newline - reading->at) : left;
        size_t kept = length < LINE_MOST ? length : LINE_MOST - 1;
        memcpy(reading->text, reading->at, kept);
        while (kept > 0 && isspace((unsigned char)reading->text[kept - 1]))
            kept--;
        reading->text[kept] = '\0';
        reading->at += length + (newline != NULL);
        reading->line++;
        const char *first = reading->text + strspn(reading->text, " \t");
        if (*first && *first != '#')
            return true;
    }
    return false;
}

/* Cuts the line into at most `most` fields; the last one keeps the rest of the line. */
static size_t split(char *text, char *fields[], size_t most)
{
    size_t count = 0;
    for (char *at = text + strspn(text, " \t"); *at && count < most;) {
        fields[count++] = at;
        if (count == most)
            break;
        at += strcspn(at, " \t");
        if (*at)
            *at++ = '\0';
        at += strspn(at, " \t");
    }
    return count;
}

/* A number at *text, which is moved past it. */
static bool take_number(const char **text, double *out)
{
    char number[48];
    size_t length = strspn(*text, "+-.0123456789eE");
    if (length == 0 || length >= sizeof number)
        return false;
    memcpy(number, *text, length);
    number[length] = '\0';
    *text += length;
    return number_parse(number, out);
}

static bool take_integer(const char **text, int64_t *out)
{
    double value;
    if (!take_number(text, &value) || value != floor(value) || fabs(value) > 1e15)
        return false;
    *out = (int64_t)value;
    return true;
}

/* ---- record line ---- */

static bool parse_start(char *fields[], size_t count, struct wfdb_header *out)
{
    int day, month, year, used = 0;
    struct civil date = {0};
    char clock[64];
    out->start_civil_ns = out->time_of_day_ns = NS_NONE;
    if (count < 5)
        return true;
    /* Without hours, a base time is minutes and seconds; seconds alone are not written. */
    (void)snprintf(clock, sizeof clock, "%s", fields[4]);
    if (!day_time_parse(clock, &out->time_of_day_ns))
        return false;
    if (count < 6)
        return true;
    if (sscanf(fields[5], "%d/%d/%d%n", &day, &month, &year, &used) != 3 || fields[5][used])
        return false;
    date = (struct civil){.year = year, .month = month, .day = day};
    if (day == 0 && month == 0 && year == 0)
        return true;
    if (!civil_valid(&date))
        return false;
    out->start_civil_ns = civil_to_ns(&date) + out->time_of_day_ns;
    return true;
}

static int take_counts(const struct reading *reading, char *fields[], size_t count,
                       struct wfdb_header *out)
{
    int64_t segments = 0, signals = 0;
    char *slash = strchr(fields[0], '/');
    if (slash) {
        const char *text = slash + 1;
        if (!take_integer(&text, &segments) || *text || segments < 1 || segments > 1000000)
            return refuse(reading, "number of segments", slash + 1);
        *slash = '\0';
    }
    const char *text = count > 1 ? fields[1] : "";
    if (!take_integer(&text, &signals) || *text || signals < 0 || signals > COUNT_MOST)
        return refuse(reading, "number of signals", count > 1 ? fields[1] : "");
    out->signal_count = (size_t)signals;
    out->segment_count = (size_t)segments;
    return ERR_OK;
}

static int record_line(struct reading *reading, struct wfdb_header *out)
{
    char *fields[6] = {0};
    if (!next_line(reading))
        return err_set(reading->err, ERR_FORMAT, "%s: no record line in it", reading->path);
    size_t count = split(reading->text, fields, 6);
    int failed = take_counts(reading, fields, count, out);
    if (failed)
        return failed;
    out->name = arena_string(reading->arena, fields[0]);
    if (!out->name)
        return err_memory(reading->err, "a header");
    out->rate_hz = 250;
    const char *text = count > 2 ? fields[2] : "250";
    if (!take_number(&text, &out->rate_hz) || !(out->rate_hz > 0) || out->rate_hz > 1e7)
        return refuse(reading, "sampling rate", fields[2]);
    text = count > 3 ? fields[3] : "0";
    if (!take_integer(&text, &out->frames) || *text || out->frames < 0)
        return refuse(reading, "number of samples", fields[3]);
    if (!parse_start(fields, count, out))
        return refuse(reading, "start time or date", count > 5 ? fields[5] : fields[4]);
    return ERR_OK;
}

/* ---- signal lines ---- */

/* "212x4:12+512": format, samples a frame, skew, byte offset. */
static bool parse_format(const char *text, struct wfdb_signal *out)
{
    int64_t format;
    out->per_frame = 1;
    if (!isdigit((unsigned char)*text))
        return false;
    char digits[8];
    size_t length = strspn(text, "0123456789");
    if (length >= sizeof digits)
        return false;
    memcpy(digits, text, length);
    digits[length] = '\0';
    if (!integer_parse(digits, &format))
        return false;
    out->format = (int)format;
    text += length;
    while (*text) {
        char kind = *text++;
        int64_t value;
        char number[16];
        length = strspn(text, "0123456789");
        if (length == 0 || length >= sizeof number)
            return false;
        memcpy(number, text, length);
        number[length] = '\0';
        text += length;
        if (!integer_parse(number, &value))
            return false;
        if (kind == 'x')
            out->per_frame = value;
        else if (kind == ':')
            out->skew = value;
        else if (kind == '+')
            out->offset = value;
        else
            return false;
    }
    return out->per_frame >= 1 && out->per_frame <= 100000 && out->skew < (int64_t)1 << 40;
}

/* "200(1024)/mV": gain, baseline, unit. */
static bool parse_gain(struct reading *reading, const char *text, struct wfdb_signal *out,
                       bool *has_baseline)
{
    *has_baseline = false;
    if (!take_number(&text, &out->gain))
        return false;
    if (*text == '(') {
        text++;
        if (!take_number(&text, &out->baseline) || *text++ != ')')
            return false;
        *has_baseline = true;
    }
    if (*text == '/') {
        out->unit = recording_text(reading->arena, (const uint8_t *)text + 1, strlen(text + 1));
        return out->unit != NULL;
    }
    return *text == '\0';
}

static int signal_line(struct reading *reading, size_t index, struct wfdb_signal *out)
{
    char *fields[FIELDS_MOST] = {0};
    bool has_baseline = false;
    int64_t zero = 0;
    if (!next_line(reading))
        return err_set(reading->err, ERR_FORMAT, "%s:%zu: the line of signal %zu is missing",
                       reading->path, reading->line + 1, index);
    size_t count = split(reading->text, fields, FIELDS_MOST);
    *out = (struct wfdb_signal){.unit = "mV"};
    if (count < 2 || !parse_format(fields[1], out))
        return refuse(reading, "signal format", count > 1 ? fields[1] : fields[0]);
    if (count > 2 && !parse_gain(reading, fields[2], out, &has_baseline))
        return refuse(reading, "gain", fields[2]);
    const char *text = count > 4 ? fields[4] : "0";
    if (!take_integer(&text, &zero) || *text)
        return refuse(reading, "ADC zero", fields[4]);
    if (out->gain == 0)
        out->gain = 200; /* uncalibrated: the value the format names for that */
    if (!has_baseline)
        out->baseline = (double)zero;
    out->first_value = zero;
    text = count > 5 ? fields[5] : "";
    if (*text && (!take_integer(&text, &out->first_value) || *text))
        return refuse(reading, "initial value", fields[5]);
    out->file = arena_string(reading->arena, fields[0]);
    out->description =
        count > 8 ? recording_text(reading->arena, (const uint8_t *)fields[8], strlen(fields[8]))
                  : arena_printf(reading->arena, "signal %zu", index);
    return out->file && out->description && out->unit ? ERR_OK
                                                      : err_memory(reading->err, "a header");
}

static int segment_line(struct reading *reading, struct wfdb_segment *out)
{
    char *fields[2] = {0};
    if (!next_line(reading))
        return err_set(reading->err, ERR_FORMAT, "%s:%zu: a segment's line is missing",
                       reading->path, reading->line + 1);
    size_t count = split(reading->text, fields, 2);
    const char *text = count > 1 ? fields[1] : "";
    if (!take_integer(&text, &out->frames) || *text || out->frames < 0)
        return refuse(reading, "segment length", count > 1 ? fields[1] : "");
    out->name = arena_string(reading->arena, fields[0]);
    return out->name ? ERR_OK : err_memory(reading->err, "a header");
}

int wfdb_header_read(const char *text, size_t size, const char *path, struct arena *arena,
                     struct wfdb_header *out, struct err *err)
{
    struct reading reading = {
        .at = text, .end = text + size, .path = path, .arena = arena, .err = err};
    struct wfdb_header header = {0};
    int failed = record_line(&reading, &header);
    if (failed)
        return failed;
    if (header.segment_count > 0)
        header.segments = arena_alloc(arena, header.segment_count, sizeof *header.segments);
    else
        header.signals = arena_alloc(arena, header.signal_count + 1, sizeof *header.signals);
    if (!header.segments && !header.signals)
        return err_memory(err, "a header");
    for (size_t i = 0; i < header.segment_count && !failed; i++)
        failed = segment_line(&reading, &header.segments[i]);
    for (size_t i = 0; header.signals && i < header.signal_count && !failed; i++)
        failed = signal_line(&reading, i, &header.signals[i]);
    if (!failed)
        *out = header;
    return failed;
}
