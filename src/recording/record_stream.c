/*
 * record_stream.c - EDF and BDF records as they stream in. Keeps one header or one record.
 */
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "recording/edf_annotations.h"
#include "recording/reader.h"
#include "recording/stream_parser_impl.h"

enum { RECORD_MOST = 64 << 20, SIGNALS_MOST = 1024, SIGNALS_AT = 252 };

enum expecting { EXPECT_HEADER, EXPECT_RECORD };

struct record_stream {
    struct stream_sink sink;
    struct complaints *complaints;
    enum expecting expecting;
    uint8_t *bytes; /* of the header or record being collected, shape (room) */
    size_t count, room;
    struct recording home; /* where the header's texts live */
    struct edf_header header;
    struct stream_channel *channels; /* in home.arena */
    size_t channel_count;
    float *samples; /* of one record, shape (all samples) */
};

static const uint8_t signatures[2][SIGNATURE_SIZE] = {{'0', ' ', ' ', ' ', ' ', ' ', ' ', ' '},
                                                      {0xFF, 'B', 'I', 'O', 'S', 'E', 'M', 'I'}};

bool record_signature(const uint8_t *bytes, size_t count)
{
    count = count < SIGNATURE_SIZE ? count : SIGNATURE_SIZE;
    return memcmp(bytes, signatures[0], count) == 0 || memcmp(bytes, signatures[1], count) == 0;
}

int record_stream_new(const struct stream_sink *sink, struct complaints *complaints,
                      struct record_stream **out, struct err *err)
{
    struct record_stream *made = calloc(1, sizeof *made);
    if (!made)
        return err_memory(err, "a stream of records");
    made->sink = *sink;
    made->complaints = complaints;
    int failed = array_reserve((void **)&made->bytes, &made->room, EDF_FIXED_BYTES, 1, err);
    if (failed)
        free(made);
    else
        *out = made;
    return failed;
}

static void forget_header(struct record_stream *records)
{
    arena_free(&records->home.arena);
    free(records->home.notes);
    records->home = (struct recording){.info = {.path = "stream"}};
    records->channels = NULL;
    records->channel_count = 0;
}

void record_stream_free(struct record_stream *records)
{
    if (!records)
        return;
    forget_header(records);
    free(records->bytes);
    free(records->samples);
    free(records);
}

void record_stream_break(struct record_stream *records)
{
    if (records->count > 0)
        complain(records->complaints, (int64_t)records->count, "broke off in the middle of a %s",
                 records->expecting == EXPECT_HEADER ? "header" : "record");
    records->count = 0;
    records->expecting = EXPECT_HEADER;
}

/* ---- header ---- */

/* Bytes of the whole header once its fixed part is there; 0 when that cannot be one. */
static size_t header_size(const struct record_stream *records)
{
    char text[5] = {0};
    int64_t signals;
    if (records->count < EDF_FIXED_BYTES)
        return EDF_FIXED_BYTES;
    memcpy(text, records->bytes + SIGNALS_AT, 4);
    if (!integer_parse(text, &signals) || signals < 1 || signals > SIGNALS_MOST)
        return 0;
    return (size_t)(EDF_FIXED_BYTES + signals * EDF_SIGNAL_BYTES);
}

static int take_channels(struct record_stream *records, struct err *err)
{
    const struct edf_header *header = &records->header;
    struct arena *arena = &records->home.arena;
    records->channels = arena_alloc(arena, header->signal_count, sizeof *records->channels);
    if (!records->channels)
        return err_memory(err, "the channels");
    for (size_t i = 0; i < header->signal_count; i++) {
        const struct edf_signal *signal = &header->signals[i];
        char why[120];
        int number = 1;
        if (signal->annotations || signal->samples < 1)
            continue;
        for (size_t k = 0; k < records->channel_count; k++)
            number += strcmp(records->channels[k].label, signal->label) == 0;
        const char *label = !*signal->label ? arena_printf(arena, "channel %zu", i + 1)
                            : number == 1   ? signal->label
                                            : arena_printf(arena, "%s #%d", signal->label, number);
        if (!label)
            return err_memory(err, "a channel");
        double dmin =
            signal->gain != 0 ? (signal->physical_min - signal->offset) / signal->gain : 0;
        double dmax =
            signal->gain != 0 ? (signal->physical_max - signal->offset) / signal->gain : 0;
        records->channels[records->channel_count++] =
            (struct stream_channel){.label = label,
                                    .unit = signal->unit,
                                    .role = role_of_label(label, signal->unit, why, sizeof why),
                                    .transducer = signal->transducer,
                                    .prefilter = signal->prefilter,
                                    .physical_min = signal->physical_min,
                                    .physical_max = signal->physical_max,
                                    .digital_min = (int)lrint(dmin),
                                    .digital_max = (int)lrint(dmax),
                                    .samples = (int)signal->samples};
    }
    return ERR_OK;
}

/* What a stream must say that a file need not. */
static const char *unusable(const struct record_stream *records)
{
    const struct edf_header *header = &records->header;
    if (header->record_ns <= 0)
        return "a record's duration is 0";
    if (header->record_bytes <= 0 || header->record_bytes > RECORD_MOST)
        return "a record has no size that can be";
    return records->channel_count == 0 ? "it has no channel" : NULL;
}

static int tell_header(struct record_stream *records, struct err *err)
{
    void *samples = NULL;
    size_t count = 0;
    for (size_t i = 0; i < records->channel_count; i++)
        count += (size_t)records->channels[i].samples;
    int failed = array_new(&samples, count, sizeof *records->samples, err);
    if (!failed)
        failed = array_reserve((void **)&records->bytes, &records->room,
                               (size_t)records->header.record_bytes + EDF_FIXED_BYTES, 1, err);
    if (failed) {
        free(samples);
        return failed;
    }
    free(records->samples);
    records->samples = samples;
    struct stream_header header = {records->channels, records->channel_count,
                                   records->header.record_ns, 1};
    records->expecting = EXPECT_RECORD;
    return records->sink.header(records->sink.context, &header, err);
}

/* Drops bytes from the front; what lies behind them moves up. */
static void consume(struct record_stream *records, size_t count)
{
    memmove(records->bytes, records->bytes + count, records->count - count);
    records->count -= count;
}

/* The bytes collected are no header: skips to where the next one may begin. */
static void skip_to_signature(struct record_stream *records, const char *why)
{
    size_t at = 1;
    while (at < records->count && !record_signature(records->bytes + at, records->count - at))
        at++;
    complain(records->complaints, (int64_t)at, "no header of EDF or BDF: %s", why);
    consume(records, at);
}

static int end_header(struct record_stream *records, size_t size, struct err *err)
{
    struct err why = {0};
    forget_header(records);
    int failed = edf_header_read(&records->home, records->bytes, size, &records->header, &why);
    if (failed == ERR_MEMORY)
        return err_set(err, failed, "%s", why.text);
    if (!failed)
        failed = take_channels(records, err);
    if (failed == ERR_MEMORY)
        return failed;
    const char *bad = failed ? why.text : unusable(records);
    if (bad) {
        skip_to_signature(records, bad);
        return ERR_OK;
    }
    consume(records, size);
    return tell_header(records, err);
}

/* ---- records ---- */

static int32_t load(const uint8_t *from, int width)
{
    if (width == 2)
        return (int16_t)(from[0] | from[1] << 8);
    return (int32_t)((uint32_t)from[0] << 8 | (uint32_t)from[1] << 16 | (uint32_t)from[2] << 24) >>
           8;
}

static float *decode(const struct edf_signal *signal, const uint8_t *from, int width, float *out)
{
    for (int64_t i = 0; i < signal->samples; i++) {
        int32_t value = load(from + i * width, width);
        bool missing = signal->has_missing && value == signal->missing;
        *out++ = missing ? NAN : (float)(signal->gain * value + signal->offset);
    }
    return out;
}

/* The onset that an EDF+ record states; false when it should and does not. */
static bool own_onset(const struct record_stream *records, int64_t *own_ns)
{
    const struct edf_header *header = &records->header;
    *own_ns = NS_NONE;
    if (!header->plus)
        return true;
    for (size_t i = 0; i < header->signal_count; i++) {
        const struct edf_signal *signal = &header->signals[i];
        if (signal->annotations)
            return tal_record_onset(records->bytes + signal->at,
                                    (size_t)(signal->samples * header->width), own_ns);
    }
    return true;
}

static int end_record(struct record_stream *records, struct err *err)
{
    const struct edf_header *header = &records->header;
    int64_t own_ns;
    float *to = records->samples;
    if (!own_onset(records, &own_ns)) {
        complain(records->complaints, header->record_bytes,
                 "a record states no onset: bytes were lost; looking for the next header");
        consume(records, (size_t)header->record_bytes);
        records->expecting = EXPECT_HEADER;
        return ERR_OK;
    }
    for (size_t i = 0; i < header->signal_count; i++) {
        const struct edf_signal *signal = &header->signals[i];
        if (!signal->annotations)
            to = decode(signal, records->bytes + signal->at, header->width, to);
    }
    consume(records, (size_t)header->record_bytes);
    return records->sink.block(records->sink.context, own_ns, records->samples, err);
}

/* A header where a record should begin: told by its signature, and by saying how long it is. */
static bool header_instead(const struct record_stream *records)
{
    enum { SIZE_AT = 184, SIZE_BYTES = 8 };
    char text[SIZE_BYTES + 1] = {0};
    int64_t said;
    if (records->count < EDF_FIXED_BYTES)
        return false;
    memcpy(text, records->bytes + SIZE_AT, SIZE_BYTES);
    return integer_parse(text, &said) && said > 0 && (size_t)said == header_size(records);
}

/* Does what can be done with the bytes there are; *need is 0 then, else how many it takes. */
static int step_header(struct record_stream *records, size_t *need, struct err *err)
{
    *need = 0;
    if (records->count < SIGNATURE_SIZE) {
        *need = SIGNATURE_SIZE;
        return ERR_OK;
    }
    size_t size = record_signature(records->bytes, records->count) ? header_size(records) : 0;
    if (size == 0) {
        skip_to_signature(records, "its first bytes are others");
        return ERR_OK;
    }
    if (records->count >= size && records->count >= EDF_FIXED_BYTES + EDF_SIGNAL_BYTES)
        return end_header(records, size, err);
    *need = size > records->count ? size : records->count + 1;
    return ERR_OK;
}

static int step_record(struct record_stream *records, size_t *need, struct err *err)
{
    size_t size = (size_t)records->header.record_bytes;
    bool signature =
        records->count >= SIGNATURE_SIZE && record_signature(records->bytes, records->count);
    *need = 0;
    /* A record that begins like a header is looked at as far as a header tells. */
    if (signature && records->count < EDF_FIXED_BYTES) {
        *need = EDF_FIXED_BYTES;
    } else if (signature && header_instead(records)) {
        records->expecting = EXPECT_HEADER;
    } else if (records->count < size) {
        *need = records->count < SIGNATURE_SIZE && size > SIGNATURE_SIZE ? SIGNATURE_SIZE : size;
    } else {
        return end_record(records, err);
    }
    return ERR_OK;
}

static int take_more(struct record_stream *records, size_t need, const uint8_t **bytes,
                     size_t *count, struct err *err)
{
    size_t part = need - records->count < *count ? need - records->count : *count;
    int failed =
        array_reserve((void **)&records->bytes, &records->room, records->count + part, 1, err);
    if (failed)
        return failed;
    memcpy(records->bytes + records->count, *bytes, part);
    records->count += part;
    *bytes += part;
    *count -= part;
    return ERR_OK;
}

int record_stream_feed(struct record_stream *records, const uint8_t *bytes, size_t count,
                       struct err *err)
{
    size_t need = 0;
    int failed = ERR_OK;
    while (!failed && (need == 0 || count > 0)) {
        if (need > 0)
            failed = take_more(records, need, &bytes, &count, err);
        if (!failed)
            failed = records->expecting == EXPECT_HEADER ? step_header(records, &need, err)
                                                         : step_record(records, &need, err);
    }
    return failed;
}
