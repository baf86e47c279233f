/*
 * edf_writer.c - writing EDF+ and BDF+ record by record. Keeps nothing of the signal in memory but
 * one record; reads nothing back.
 */
#include "recording/edf_writer.h"

#include <errno.h>
#include <fcntl.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "base/array.h"
#include "base/ns.h"
#include "base/str.h"

enum { ANNOTATION_BYTES = 120, COUNT_AT = 236, NUMBER_SIZE = 8 };

struct writer_channel {
    int samples;
    int low, high;       /* digital limits */
    double gain, offset; /* digital = (physical - offset) / gain, from the header's own text */
};

struct queued {
    char *text; /* a whole list, without the final zero */
    size_t length;
};

struct edf_writer {
    int fd;
    char *path;
    bool bdf, discontinuous;
    int width;
    struct writer_channel *channels;
    size_t channel_count;
    size_t annotation_bytes, record_bytes;
    uint8_t *record;
    int64_t start_fraction_ns, record_ns, next_onset_ns;
    int64_t records, clipped;
    struct queued *queue;
    size_t queue_first, queue_count, queue_room;
};

/* ---- header fields ---- */

static int put_field(struct str *header, const char *text, size_t size, const char *name,
                     struct err *err)
{
    size_t length = strlen(text);
    for (size_t i = 0; i < length; i++) {
        if (text[i] < 32 || text[i] > 126)
            return err_set(err, ERR_USAGE, "EDF %s '%s' has a character that is not ASCII", name,
                           text);
    }
    if (length > size)
        return err_set(err, ERR_USAGE, "EDF %s '%s' is longer than %zu characters", name, text,
                       size);
    str_put(header, text);
    for (size_t i = length; i < size; i++)
        str_putc(header, ' ');
    return ERR_OK;
}

/* The best text of a number that fits into 8 characters. */
static void number_text(double value, char out[NUMBER_SIZE + 1])
{
    char text[40];
    for (int digits = 8; digits > 0; digits--) {
        (void)snprintf(text, sizeof text, "%.*g", digits, value);
        /* EDF readers expect plain decimals: no exponent. */
        if (strchr(text, 'e'))
            (void)snprintf(text, sizeof text, "%.*f", digits > 6 ? 6 : digits, value);
        if (strlen(text) <= NUMBER_SIZE)
            break;
    }
    (void)snprintf(out, NUMBER_SIZE + 1, "%.*s", NUMBER_SIZE, text);
}

static int put_number(struct str *header, double value, const char *name, struct err *err)
{
    char text[NUMBER_SIZE + 1];
    number_text(value, text);
    return put_field(header, text, NUMBER_SIZE, name, err);
}

static void start_texts(int64_t start_civil_ns, char date[9], char clock[9], char plus[12])
{
    static const char *const months[] = {"JAN", "FEB", "MAR", "APR", "MAY", "JUN",
                                         "JUL", "AUG", "SEP", "OCT", "NOV", "DEC"};
    struct civil c = civil_from_ns(start_civil_ns);
    (void)snprintf(date, 9, "%02u.%02u.%02u", (unsigned)c.day % 100, (unsigned)c.month % 100,
                   (unsigned)c.year % 100);
    (void)snprintf(clock, 9, "%02u.%02u.%02u", (unsigned)c.hour % 100, (unsigned)c.minute % 100,
                   (unsigned)c.second % 100);
    (void)snprintf(plus, 12, "%02u-%s-%04u", (unsigned)c.day % 100, months[(c.month - 1) % 12],
                   (unsigned)c.year % 10000);
}

static int put_fixed(struct str *header, const struct edf_spec *spec, struct err *err)
{
    char date[9], clock[9], plus[12], number[12], recording[128], seconds[NUMBER_SIZE + 1];
    size_t signals = spec->channel_count + 1;
    start_texts(spec->start_civil_ns, date, clock, plus);
    if (spec->bdf)
        str_put(header, "\xFF"
                        "BIOSEMI");
    else
        str_put(header, "0       ");
    (void)snprintf(recording, sizeof recording, "Startdate %s %.80s", plus,
                   spec->recording ? spec->recording : "X X X");
    int failed = put_field(header, spec->subject ? spec->subject : "X X X X", 80, "patient", err);
    if (!failed)
        failed = put_field(header, recording, 80, "recording", err);
    if (failed)
        return failed;
    str_put(header, date);
    str_put(header, clock);
    (void)snprintf(number, sizeof number, "%zu", 256 * (signals + 1));
    failed = put_field(header, number, 8, "header size", err);
    if (!failed)
        failed = put_field(header,
                           spec->bdf ? (spec->discontinuous ? "BDF+D" : "BDF+C")
                                     : (spec->discontinuous ? "EDF+D" : "EDF+C"),
                           44, "format", err);
    if (!failed)
        failed = put_field(header, "-1", 8, "record count", err);
    number_text(s_from_ns(spec->record_ns), seconds);
    double back;
    if (!failed && (!number_parse(seconds, &back) || ns_from_s(back) != spec->record_ns))
        failed = err_set(err, ERR_USAGE, "a record of %lld ns cannot be written in 8 characters",
                         (long long)spec->record_ns);
    if (!failed)
        failed = put_field(header, seconds, 8, "record duration", err);
    (void)snprintf(number, sizeof number, "%zu", signals);
    return failed ? failed : put_field(header, number, 4, "signal count", err);
}

struct limits {
    int low, high;
};

static struct limits digital_limits(const struct edf_spec *spec,
                                    const struct edf_channel_spec *channel)
{
    if (channel && (channel->digital_min != 0 || channel->digital_max != 0))
        return (struct limits){channel->digital_min, channel->digital_max};
    return spec->bdf ? (struct limits){-8388608, 8388607} : (struct limits){-32768, 32767};
}

/* One per-signal field for all signals, the annotation signal last. */
static int put_signals(struct str *header, const struct edf_spec *spec, size_t annotation_samples,
                       struct err *err)
{
    int failed = ERR_OK;
    for (int field = 0; field < 10 && !failed; field++) {
        for (size_t i = 0; i <= spec->channel_count && !failed; i++) {
            const struct edf_channel_spec *c = i < spec->channel_count ? &spec->channels[i] : NULL;
            struct limits limits = digital_limits(spec, c);
            switch (field) {
            case 0:
                failed = put_field(header,
                                   c           ? c->label
                                   : spec->bdf ? "BDF Annotations"
                                               : "EDF Annotations",
                                   16, "label", err);
                break;
            case 1:
                failed = put_field(header, c ? c->transducer : "", 80, "transducer", err);
                break;
            case 2:
                failed = put_field(header, c ? c->unit : "", 8, "unit", err);
                break;
            case 3:
                failed = put_number(header, c ? c->physical_min : -1, "physical minimum", err);
                break;
            case 4:
                failed = put_number(header, c ? c->physical_max : 1, "physical maximum", err);
                break;
            case 5:
                failed = put_number(header, limits.low, "digital minimum", err);
                break;
            case 6:
                failed = put_number(header, limits.high, "digital maximum", err);
                break;
            case 7:
                failed = put_field(header, c ? c->prefilter : "", 80, "prefilter", err);
                break;
            case 8:
                failed = put_number(header, c ? c->samples_per_record : (double)annotation_samples,
                                    "samples in a record", err);
                break;
            default:
                failed = put_field(header, "", 32, "reserved", err);
            }
        }
    }
    if (!failed && str_failed(header))
        failed = err_memory(err, "a header");
    return failed;
}

/* ---- opening ---- */

static int plan_channel(const struct edf_spec *spec, const struct edf_channel_spec *channel,
                        struct writer_channel *out, struct err *err)
{
    struct limits limits = digital_limits(spec, channel);
    char low_text[NUMBER_SIZE + 1], high_text[NUMBER_SIZE + 1];
    double low, high;
    number_text(channel->physical_min, low_text);
    number_text(channel->physical_max, high_text);
    if (!number_parse(low_text, &low) || !number_parse(high_text, &high) || low == high ||
        limits.high <= limits.low || channel->samples_per_record < 1)
        return err_set(err, ERR_USAGE, "channel '%s' has no usable range or rate", channel->label);
    double gain = (high - low) / ((double)limits.high - limits.low);
    *out = (struct writer_channel){channel->samples_per_record, limits.low, limits.high, gain,
                                   low - gain * limits.low};
    return ERR_OK;
}

static int plan(struct edf_writer *writer, const struct edf_spec *spec, struct err *err)
{
    void *memory = NULL;
    int failed = array_new_zero(&memory, spec->channel_count, sizeof *writer->channels, err);
    if (failed)
        return failed;
    writer->channels = memory;
    writer->channel_count = spec->channel_count;
    size_t samples = 0;
    for (size_t i = 0; i < spec->channel_count && !failed; i++) {
        failed = plan_channel(spec, &spec->channels[i], &writer->channels[i], err);
        samples += (size_t)writer->channels[i].samples;
    }
    writer->bdf = spec->bdf;
    writer->discontinuous = spec->discontinuous;
    writer->width = spec->bdf ? 3 : 2;
    size_t width = (size_t)writer->width;
    size_t wanted = spec->annotation_bytes ? spec->annotation_bytes : ANNOTATION_BYTES;
    writer->annotation_bytes = (wanted + width - 1) / width * width;
    writer->record_bytes = samples * width + writer->annotation_bytes;
    writer->record_ns = spec->record_ns;
    writer->start_fraction_ns = civil_from_ns(spec->start_civil_ns).ns;
    if (!failed && (writer->record_ns <= 0 || spec->channel_count == 0))
        failed = err_set(err, ERR_USAGE, "a recording needs channels and a record duration");
    if (failed)
        return failed;
    failed = array_new_zero(&memory, writer->record_bytes, 1, err);
    if (!failed)
        writer->record = memory;
    return failed;
}

static int write_all(struct edf_writer *writer, const void *data, size_t size, off_t at,
                     struct err *err)
{
    const uint8_t *from = data;
    for (size_t done = 0; done < size;) {
        ssize_t wrote = pwrite(writer->fd, from + done, size - done, at + (off_t)done);
        if (wrote < 0 && errno == EINTR)
            continue;
        if (wrote <= 0)
            return err_errno(err, writer->path, "write");
        done += (size_t)wrote;
    }
    return ERR_OK;
}

static int write_header(struct edf_writer *writer, const struct edf_spec *spec, struct err *err)
{
    struct str header = {0};
    int failed = put_fixed(&header, spec, err);
    if (!failed)
        failed = put_signals(&header, spec, writer->annotation_bytes / (size_t)writer->width, err);
    if (!failed)
        failed = write_all(writer, header.text, header.length, 0, err);
    str_free(&header);
    return failed;
}

static void writer_free(struct edf_writer *writer)
{
    if (writer->fd >= 0)
        (void)close(writer->fd);
    for (size_t i = writer->queue_first; i < writer->queue_count; i++)
        free(writer->queue[i].text);
    free(writer->queue);
    free(writer->channels);
    free(writer->record);
    free(writer->path);
    free(writer);
}

int edf_writer_open(const char *path, const struct edf_spec *spec, struct edf_writer **out,
                    struct err *err)
{
    struct edf_writer *made = calloc(1, sizeof *made);
    if (!made)
        return err_memory(err, path);
    made->fd = -1;
    made->path = strdup(path);
    int failed = made->path ? plan(made, spec, err) : err_memory(err, path);
    if (!failed) {
        made->fd = open(path, O_WRONLY | O_CREAT | O_EXCL | O_CLOEXEC, 0600);
        if (made->fd < 0)
            failed = err_errno(err, path, "create it");
    }
    if (!failed) {
        failed = write_header(made, spec, err);
        if (failed)
            (void)unlink(path);
    }
    if (failed)
        writer_free(made);
    else
        *out = made;
    return failed;
}

/* ---- records ---- */

/* "+12.5" with as many decimals as the value needs. */
static void put_onset(struct str *out, int64_t ns)
{
    uint64_t size = ns < 0 ? -(uint64_t)ns : (uint64_t)ns;
    char fraction[16];
    (void)snprintf(fraction, sizeof fraction, "%09llu",
                   (unsigned long long)(size % (uint64_t)NS_PER_S));
    size_t digits = 9;
    while (digits > 0 && fraction[digits - 1] == '0')
        digits--;
    str_putf(out, "%c%llu", ns < 0 ? '-' : '+', (unsigned long long)(size / (uint64_t)NS_PER_S));
    if (digits > 0)
        str_putf(out, ".%.*s", (int)digits, fraction);
}

int edf_writer_annotate(struct edf_writer *writer, int64_t onset_ns, int64_t span_ns,
                        const char *text, struct err *err)
{
    struct str list = {0};
    put_onset(&list, onset_ns + writer->start_fraction_ns);
    if (span_ns > 0) {
        struct str span = {0};
        put_onset(&span, span_ns);
        str_putc(&list, 0x15);
        str_put(&list, str_text(&span) + 1); /* a duration has no sign */
        str_free(&span);
    }
    str_putc(&list, 0x14);
    for (const char *c = text; *c; c++)
        str_putc(&list, *c == 0x14 || *c == 0x15 ? ' ' : *c);
    str_putc(&list, 0x14);
    /* The time-keeping list of a record takes up to 24 bytes. */
    int failed = ERR_OK;
    if (str_failed(&list))
        failed = err_memory(err, "an annotation");
    else if (list.length + 1 + 24 > writer->annotation_bytes)
        failed = err_set(err, ERR_USAGE, "annotation '%.40s' is longer than the room for it", text);
    if (!failed)
        failed = array_reserve((void **)&writer->queue, &writer->queue_room,
                               writer->queue_count + 1, sizeof *writer->queue, err);
    if (failed) {
        str_free(&list);
        return failed;
    }
    writer->queue[writer->queue_count++] = (struct queued){list.text, list.length};
    return ERR_OK;
}

/* The time-keeping list, then queued ones while they fit. They leave the queue only once the
 * record is on disk: *taken says how many. */
static int fill_annotations(struct edf_writer *writer, uint8_t *to, int64_t onset_ns, size_t *taken,
                            struct err *err)
{
    struct str text = {0};
    put_onset(&text, onset_ns + writer->start_fraction_ns);
    str_put(&text, "\x14\x14");
    str_putc(&text, '\0');
    *taken = 0;
    for (size_t i = writer->queue_first; i < writer->queue_count; i++) {
        const struct queued *queued = &writer->queue[i];
        if (text.length + queued->length + 1 > writer->annotation_bytes)
            break;
        str_put_n(&text, queued->text, queued->length);
        str_putc(&text, '\0');
        (*taken)++;
    }
    if (str_failed(&text)) {
        str_free(&text);
        return err_memory(err, "a record");
    }
    memset(to, 0, writer->annotation_bytes);
    memcpy(to, text.text, text.length);
    str_free(&text);
    return ERR_OK;
}

static void drop_taken(struct edf_writer *writer, size_t taken)
{
    for (size_t i = 0; i < taken; i++)
        free(writer->queue[writer->queue_first + i].text);
    writer->queue_first += taken;
    if (writer->queue_first == writer->queue_count)
        writer->queue_first = writer->queue_count = 0;
}

static int32_t digital(const struct writer_channel *channel, float value, int64_t *clipped)
{
    if (isnan(value)) {
        (*clipped)++;
        return channel->low;
    }
    double raw = ((double)value - channel->offset) / channel->gain;
    if (raw < channel->low - 0.5 || raw > channel->high + 0.5)
        (*clipped)++;
    if (raw <= channel->low)
        return channel->low;
    if (raw >= channel->high)
        return channel->high;
    return (int32_t)lrint(raw);
}

static uint8_t *encode(const struct writer_channel *channel, int width, const float *samples,
                       uint8_t *to, int64_t *clipped)
{
    for (int i = 0; i < channel->samples; i++) {
        uint32_t value = (uint32_t)digital(channel, samples[i], clipped);
        for (int byte = 0; byte < width; byte++)
            *to++ = (uint8_t)(value >> (8 * byte));
    }
    return to;
}

int edf_writer_record(struct edf_writer *writer, int64_t onset_ns, const float *samples,
                      struct err *err)
{
    if (!writer->discontinuous)
        onset_ns = writer->next_onset_ns;
    else if (onset_ns < writer->next_onset_ns)
        return err_set(err, ERR_USAGE, "%s: a record may not start before the last one ends",
                       writer->path);
    uint8_t *to = writer->record;
    int64_t clipped = 0;
    size_t taken;
    for (size_t i = 0; i < writer->channel_count; i++) {
        to = encode(&writer->channels[i], writer->width, samples, to, &clipped);
        samples += writer->channels[i].samples;
    }
    int failed = fill_annotations(writer, to, onset_ns, &taken, err);
    off_t header = (off_t)(256 * (writer->channel_count + 2));
    if (!failed)
        failed = write_all(writer, writer->record, writer->record_bytes,
                           header + (off_t)writer->records * (off_t)writer->record_bytes, err);
    if (failed)
        return failed;
    drop_taken(writer, taken);
    writer->records++;
    writer->clipped += clipped;
    writer->next_onset_ns = onset_ns + writer->record_ns;
    return ERR_OK;
}

int edf_writer_sync(struct edf_writer *writer, struct err *err)
{
    return fdatasync(writer->fd) < 0 ? err_errno(err, writer->path, "flush to disk") : ERR_OK;
}

int64_t edf_writer_clipped(const struct edf_writer *writer)
{
    return writer->clipped;
}

static int close_writer(struct edf_writer *writer, struct err *err)
{
    char count[16];
    if (writer->queue_first < writer->queue_count)
        return err_set(err, ERR_CONFLICT,
                       "%s: %zu annotations found no room; give a record more annotation_bytes",
                       writer->path, writer->queue_count - writer->queue_first);
    (void)snprintf(count, sizeof count, "%-8lld", (long long)writer->records);
    int failed = write_all(writer, count, 8, COUNT_AT, err);
    if (!failed && fsync(writer->fd) < 0)
        failed = err_errno(err, writer->path, "flush to disk");
    return failed;
}

int edf_writer_close(struct edf_writer *writer, struct err *err)
{
    int failed = close_writer(writer, err);
    writer_free(writer);
    return failed;
}

void edf_writer_abandon(struct edf_writer *writer)
{
    if (writer)
        writer_free(writer);
}
