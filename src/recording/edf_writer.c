/*
 * edf_writer.c - writing EDF+ and BDF+ record by record. Keeps nothing of the signal in memory but
 * one record. The header is edf_writer_header.c's, reading back edf_readback.c's.
 */
#include <errno.h>
#include <fcntl.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "base/array.h"
#include "recording/edf_writer_impl.h"

enum { ANNOTATION_BYTES = 120 };

/* ---- opening ---- */

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
        failed = edf_writer_plan_channel(spec, &spec->channels[i], &writer->channels[i], err);
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
    int failed =
        edf_writer_put_header(spec, writer->annotation_bytes / (size_t)writer->width, &header, err);
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
        *clipped += !channel->lowest_is_missing;
        return channel->low;
    }
    double raw = ((double)value - channel->offset) / channel->gain;
    int low = channel->low + channel->lowest_is_missing;
    if (raw < channel->low - 0.5 || raw > channel->high + 0.5)
        (*clipped)++;
    if (raw <= low)
        return low;
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
    off_t at = (off_t)(edf_writer_header_bytes(writer->channel_count) +
                       (size_t)writer->records * writer->record_bytes);
    if (!failed)
        failed = write_all(writer, writer->record, writer->record_bytes, at, err);
    if (failed)
        return failed;
    drop_taken(writer, taken);
    writer->gapped |= onset_ns != writer->next_onset_ns;
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

int64_t edf_writer_records(const struct edf_writer *writer)
{
    return writer->records;
}

int edf_writer_finish(struct edf_writer *writer, struct err *err)
{
    char count[16];
    if (writer->queue_first < writer->queue_count)
        return err_set(err, ERR_CONFLICT,
                       "%s: %zu annotations found no room; give a record more annotation_bytes",
                       writer->path, writer->queue_count - writer->queue_first);
    (void)snprintf(count, sizeof count, "%-8lld", (long long)writer->records);
    int failed = ERR_OK;
    if (writer->discontinuous && !writer->gapped)
        failed = write_all(writer, "C", 1, EDF_KIND_AT, err);
    if (!failed)
        failed = write_all(writer, count, 8, EDF_COUNT_AT, err);
    if (!failed && fsync(writer->fd) < 0)
        failed = err_errno(err, writer->path, "flush to disk");
    return failed;
}

int edf_writer_close(struct edf_writer *writer, struct err *err)
{
    int failed = edf_writer_finish(writer, err);
    writer_free(writer);
    return failed;
}

void edf_writer_abandon(struct edf_writer *writer)
{
    if (writer)
        writer_free(writer);
}
