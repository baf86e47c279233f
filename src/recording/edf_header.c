/*
 * edf_header.c - reading an EDF or BDF header. What a maker does wrong but can only mean one thing
 * becomes a note; what cannot be meant is refused with field and byte. Decodes no samples.
 */
#include "recording/edf_header.h"

#include <ctype.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "base/ns.h"
#include "base/str.h"
#include "recording/edf_writer.h"

enum { FIELD_MOST = 80 };

struct reading {
    struct recording *recording;
    const uint8_t *data;
    size_t signal_count;
    bool comma, latin, no_range, no_digital_range; /* oddities, told once each */
};

/* Where each per-signal field starts, as a multiple of the number of signals, and its width. */
static const struct {
    const char *name;
    size_t start, size;
} signal_fields[] = {
    {"label", 0, 16},
    {"transducer type", 16, 80},
    {"physical dimension", 96, 8},
    {"physical minimum", 104, 8},
    {"physical maximum", 112, 8},
    {"digital minimum", 120, 8},
    {"digital maximum", 128, 8},
    {"prefiltering", 136, 80},
    {"samples in a record", 216, 8},
};
enum field { LABEL, TRANSDUCER, DIMENSION, PMIN, PMAX, DMIN, DMAX, PREFILTER, SAMPLES };

static size_t field_at(const struct reading *reading, enum field field, size_t signal)
{
    return EDF_FIXED_BYTES + signal_fields[field].start * reading->signal_count +
           signal_fields[field].size * signal;
}

/* The field at `at` as plain text in `out`, blanks and NULs around it removed. */
static void field_text(const struct reading *reading, size_t at, size_t size,
                       char out[FIELD_MOST + 1])
{
    const char *from = (const char *)reading->data + at;
    while (size > 0 && *from == ' ') {
        from++;
        size--;
    }
    size = strnlen(from, size);
    while (size > 0 && from[size - 1] == ' ')
        size--;
    memcpy(out, from, size);
    out[size] = '\0';
}

static int bad_field(const struct reading *reading, const char *name, size_t at, const char *text,
                     const char *want, struct err *err)
{
    return err_set(err, ERR_FORMAT, "%s: byte %zu: %s is '%.20s', not %s; the header is damaged",
                   reading->recording->info.path, at, name, text, want);
}

static int integer_field(const struct reading *reading, const char *name, size_t at, size_t size,
                         int64_t least, int64_t most, int64_t *out, struct err *err)
{
    char text[FIELD_MOST + 1];
    double value;
    field_text(reading, at, size, text);
    /* Some makers write whole numbers as 1.0 */
    if (!number_parse(text, &value) || value != floor(value) || value < (double)least ||
        value > (double)most)
        return bad_field(reading, name, at, text, "a usable whole number", err);
    *out = (int64_t)value;
    return ERR_OK;
}

/* False when there is no number at all. */
static bool limit_field(struct reading *reading, enum field field, size_t signal, double *out)
{
    char text[FIELD_MOST + 1];
    field_text(reading, field_at(reading, field, signal), signal_fields[field].size, text);
    if (number_parse(text, out))
        return true;
    reading->comma |= strchr(text, ',') != NULL;
    return number_parse_comma(text, out);
}

static bool says_missing(const char *transducer)
{
    size_t length = strlen(transducer), words = strlen(EDF_MISSING_WORDS);
    return length >= words && strcmp(transducer + length - words, EDF_MISSING_WORDS) == 0;
}

/* Gain and offset from the text of the header, or digital values when its limits say nothing. */
static void scale(struct reading *reading, size_t index, struct edf_signal *signal)
{
    double pmin, pmax, dmin, dmax;
    bool physical = limit_field(reading, PMIN, index, &pmin) &&
                    limit_field(reading, PMAX, index, &pmax) && pmin != pmax;
    bool digital = limit_field(reading, DMIN, index, &dmin) &&
                   limit_field(reading, DMAX, index, &dmax) && dmax > dmin;
    signal->gain = 1;
    signal->offset = 0;
    reading->no_range |= !physical && !signal->annotations;
    reading->no_digital_range |= !digital && !signal->annotations;
    if (!physical || !digital)
        return;
    signal->gain = (pmax - pmin) / (dmax - dmin);
    signal->offset = pmin - signal->gain * dmin;
    signal->physical_min = pmin;
    signal->physical_max = pmax;
    signal->has_missing = says_missing(signal->transducer) && dmin >= INT32_MIN;
    signal->missing = signal->has_missing ? (int32_t)dmin : 0;
}

static int signal_texts(struct reading *reading, size_t index, struct edf_signal *signal,
                        struct err *err)
{
    static const enum field text_fields[] = {LABEL, TRANSDUCER, DIMENSION, PREFILTER};
    const char **texts[] = {&signal->label, &signal->transducer, &signal->unit, &signal->prefilter};
    for (size_t i = 0; i < 4; i++) {
        const uint8_t *from = reading->data + field_at(reading, text_fields[i], index);
        size_t size = signal_fields[text_fields[i]].size;
        reading->latin |= !utf8_valid((const char *)from, strnlen((const char *)from, size));
        *texts[i] = recording_text(&reading->recording->arena, from, size);
        if (!*texts[i])
            return err_memory(err, "a signal's texts");
    }
    return ERR_OK;
}

static int read_signals(struct reading *reading, struct edf_header *header, struct err *err)
{
    header->signals =
        arena_alloc(&reading->recording->arena, header->signal_count, sizeof *header->signals);
    if (!header->signals)
        return err_memory(err, "the signals");
    for (size_t i = 0; i < header->signal_count; i++) {
        struct edf_signal *signal = &header->signals[i];
        int failed = signal_texts(reading, i, signal, err);
        if (!failed)
            failed =
                integer_field(reading, signal_fields[SAMPLES].name, field_at(reading, SAMPLES, i),
                              8, 0, 99999999, &signal->samples, err);
        if (failed)
            return failed;
        signal->annotations = header->plus && (strcmp(signal->label, "EDF Annotations") == 0 ||
                                               strcmp(signal->label, "BDF Annotations") == 0);
        scale(reading, i, signal);
        signal->at = header->record_bytes;
        header->record_bytes += signal->samples * header->width;
    }
    if (header->record_bytes == 0)
        return err_set(err, ERR_FORMAT, "%s: byte %zu: no signal has a sample in a record",
                       reading->recording->info.path, field_at(reading, SAMPLES, 0));
    return ERR_OK;
}

static int century(int yy)
{
    return yy >= 85 ? 1900 + yy : 2000 + yy;
}

/* Two-digit numbers with any separator: dd.mm.yy, hh:mm:ss. */
static bool three_numbers(const uint8_t *bytes, int out[3])
{
    for (int i = 0; i < 3; i++) {
        const uint8_t *pair = bytes + 3 * i;
        if (!isdigit(pair[0]) || !isdigit(pair[1]))
            return false;
        out[i] = (pair[0] - '0') * 10 + (pair[1] - '0');
    }
    return true;
}

/* The date in "Startdate dd-MMM-yyyy ..." of EDF+; false when it is not there or not a date. */
static bool plus_date(const uint8_t *data, struct civil *out)
{
    static const char months[] = "JANFEBMARAPRMAYJUNJULAUGSEPOCTNOVDEC";
    char text[FIELD_MOST + 1] = "", name[4];
    memcpy(text, data + 88, FIELD_MOST);
    if (!ascii_starts(text, "Startdate ") ||
        sscanf(text + 10, "%2d-%3[A-Za-z]-%4d", &out->day, name, &out->year) != 3)
        return false;
    for (int month = 1; month <= 12; month++) {
        char wanted[4] = {0};
        memcpy(wanted, months + 3 * (month - 1), 3);
        if (ascii_equal(name, wanted))
            out->month = month;
    }
    return civil_valid(out);
}

static int read_start(struct reading *reading, struct edf_header *header, struct err *err)
{
    struct recording *recording = reading->recording;
    struct civil start = {0}, plus = {0};
    int date[3], clock[3];
    bool has_plus = header->plus && plus_date(reading->data, &plus);
    bool has_date = three_numbers(reading->data + 168, date);
    header->start_civil_ns = NS_NONE;
    if (has_date)
        start = (struct civil){.day = date[0], .month = date[1], .year = century(date[2])};
    has_date = has_date && civil_valid(&start);
    int failed = ERR_OK;
    if (has_plus && !has_date)
        failed = recording_note(recording, err,
                                "start date '%.8s' (bytes 168..175) is no date; that of the "
                                "recording field is taken",
                                (const char *)reading->data + 168);
    else if (has_plus && (plus.day != start.day || plus.month != start.month))
        failed = recording_note(recording, err,
                                "the recording field says another start date than bytes "
                                "168..175; bytes 168..175 are taken");
    if (failed)
        return failed;
    if (has_plus && (!has_date || (plus.day == start.day && plus.month == start.month)))
        start = plus;
    if (!three_numbers(reading->data + 176, clock))
        clock[0] = 99;
    start.hour = clock[0];
    start.minute = clock[1];
    start.second = clock[2];
    if (!has_date && !has_plus)
        return recording_note(recording, err,
                              "start date '%.8s' (bytes 168..175) is no date; the start is taken "
                              "as not stated",
                              (const char *)reading->data + 168);
    if (!civil_valid(&start))
        return recording_note(recording, err,
                              "start time '%.8s' (bytes 176..183) is no time of day; the start is "
                              "taken as not stated",
                              (const char *)reading->data + 176);
    header->start_civil_ns = civil_to_ns(&start);
    return ERR_OK;
}

static int read_duration(struct reading *reading, struct edf_header *header, struct err *err)
{
    char text[FIELD_MOST + 1];
    double seconds;
    field_text(reading, 244, 8, text);
    if (!number_parse_comma(text, &seconds) || seconds < 0 || seconds > 1e6)
        return bad_field(reading, "duration of a record", 244, text, "a number of seconds", err);
    header->record_ns = ns_from_s(seconds);
    return ERR_OK;
}

static const char *format_name(const struct edf_header *header)
{
    if (!header->plus)
        return header->bdf ? "BDF" : "EDF";
    if (header->discontinuous)
        return header->bdf ? "BDF+D" : "EDF+D";
    return header->bdf ? "BDF+C" : "EDF+C";
}

static int note_oddities(struct reading *reading, const struct edf_header *header,
                         int64_t said_bytes, struct err *err)
{
    const struct {
        bool met;
        const char *text;
    } rows[] = {
        {reading->comma, "a physical or digital limit has a decimal comma; taken as a point"},
        {reading->latin, "a label or unit is not ASCII; read as Latin-1"},
        {reading->no_range, "a signal's physical minimum and maximum say no range; its digital "
                            "values are shown"},
        {reading->no_digital_range, "a signal's digital maximum is not above its minimum; its "
                                    "digital values are shown"},
    };
    int failed = ERR_OK;
    for (size_t i = 0; i < sizeof rows / sizeof *rows && !failed; i++) {
        if (rows[i].met)
            failed = recording_note(reading->recording, err, "%s", rows[i].text);
    }
    if (!failed && said_bytes != header->bytes)
        failed =
            recording_note(reading->recording, err,
                           "bytes 184..191 say a header of %lld bytes; %zu signals make %lld",
                           (long long)said_bytes, header->signal_count, (long long)header->bytes);
    return failed;
}

/* The fixed part, up to the number of signals. */
static int read_fixed(struct reading *reading, struct edf_header *header, size_t size,
                      int64_t *said_bytes, struct err *err)
{
    const uint8_t *data = reading->data;
    const char *path = reading->recording->info.path;
    int64_t signals;
    if (size < EDF_FIXED_BYTES)
        return err_set(err, ERR_FORMAT,
                       "%s: ends at byte %zu, inside the header of 256 bytes; the file is cut off",
                       path, size);
    header->bdf = data[0] == 0xFF;
    header->width = header->bdf ? 3 : 2;
    const char *kind = (const char *)data + 192;
    header->plus = memcmp(kind, "EDF+", 4) == 0 || memcmp(kind, "BDF+", 4) == 0;
    header->discontinuous = header->plus && kind[4] == 'D';
    header->format = format_name(header);
    int failed =
        integer_field(reading, "number of signals", 252, 4, 1, EDF_SIGNAL_MOST, &signals, err);
    if (failed)
        return failed;
    header->signal_count = reading->signal_count = (size_t)signals;
    header->bytes = EDF_FIXED_BYTES + signals * EDF_SIGNAL_BYTES;
    if ((int64_t)size < header->bytes)
        return err_set(err, ERR_FORMAT,
                       "%s: ends at byte %zu, inside the header of %lld bytes; the file is cut off",
                       path, size, (long long)header->bytes);
    if (integer_field(reading, "bytes in header", 184, 8, 0, INT32_MAX, said_bytes, NULL))
        *said_bytes = 0;
    failed = integer_field(reading, "number of records", 236, 8, -1, INT32_MAX,
                           &header->declared_records, err);
    return failed ? failed : read_duration(reading, header, err);
}

int edf_header_read(struct recording *recording, const uint8_t *data, size_t size,
                    struct edf_header *out, struct err *err)
{
    struct reading reading = {.recording = recording, .data = data};
    struct edf_header header = {0};
    int64_t said_bytes = 0;
    int failed = read_fixed(&reading, &header, size, &said_bytes, err);
    if (!failed)
        failed = read_start(&reading, &header, err);
    if (!failed)
        failed = read_signals(&reading, &header, err);
    if (!failed)
        failed = note_oddities(&reading, &header, said_bytes, err);
    if (failed)
        return failed;
    header.subject = recording_text(&recording->arena, data + 8, 80);
    header.equipment = recording_text(&recording->arena, data + 88, 80);
    if (!header.subject || !header.equipment)
        return err_memory(err, "a header");
    *out = header;
    return ERR_OK;
}
