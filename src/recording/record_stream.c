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

enum { RECORD_MOST = 64 << 20, SIGNALS_AT = 252 };

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
    float *samples;                 /* of one record, shape (all samples) */
    bool any_record, signed_onsets; /* of this header: one came; its onset had a sign */
    size_t delivered; /* bytes of the last record that are kept: they may begin a header */
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
    if (records->count > records->delivered)
        complain(records->complaints, (int64_t)(records->count - records->delivered),
                 "broke off in the middle of a %s",
                 records->expecting == EXPECT_HEADER ? "header" : "record");
    records->count = records->delivered = 0;
    records->expecting = EXPECT_HEADER;
}

/* ---- header ---- */

/* Bytes of the whole header that this fixed part begins; 0 when it cannot be one. */
static size_t header_size(const uint8_t *fixed)
{
    char text[5] = {0};
    int64_t signals;
    memcpy(text, fixed + SIGNALS_AT, 4);
    if (!integer_parse(text, &signals) || signals < 1 || signals > STREAM_CHANNELS_MOST)
        return 0;
    return (size_t)(EDF_FIXED_BYTES + signals * EDF_SIGNAL_BYTES);
}

/* A limit that no converter has becomes none. */
static int to_int(double digital)
{
    return fabs(digital) < 1 << 30 ? (int)lrint(digital) : 0;
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
        if (signal->annotations || signal->samples == 0)
            continue;
        const char *label =
            stream_label(arena, records->channels, records->channel_count, signal->label);
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
                                    .digital_min = to_int(dmin),
                                    .digital_max = to_int(dmax),
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
    records->any_record = false;
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

/* Skips at least one byte, to where the next header may begin. */
static void skip_to_signature(struct record_stream *records, const char *why)
{
    size_t at = 1;
    while (at < records->count && !record_signature(records->bytes + at, records->count - at))
        at++;
    complain(records->complaints, (int64_t)at, "%s; looking for the next header of EDF or BDF",
             why);
    consume(records, at);
    records->expecting = EXPECT_HEADER;
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

/* The onset that an EDF+ record states; false when it should and does not. After a first onset
 * with its sign, one without says that a byte was lost. */
static bool own_onset(struct record_stream *records, int64_t *own_ns)
{
    const struct edf_header *header = &records->header;
    *own_ns = NS_NONE;
    if (!header->plus)
        return true;
    for (size_t i = 0; i < header->signal_count; i++) {
        const struct edf_signal *signal = &header->signals[i];
        const uint8_t *from = records->bytes + signal->at;
        if (!signal->annotations)
            continue;
        if (!tal_record_onset(from, (size_t)(signal->samples * header->width), own_ns))
            return false;
        bool has_sign = *from == '+' || *from == '-';
        if (!records->any_record)
            records->signed_onsets = has_sign;
        records->any_record = true;
        return has_sign || !records->signed_onsets;
    }
    return true;
}

/* Is a header there, where a signature is? It says how long it is itself. */
static bool header_at(const struct record_stream *records, size_t at)
{
    enum { SIZE_AT = 184, SIZE_BYTES = 8 };
    char text[SIZE_BYTES + 1] = {0};
    int64_t said;
    memcpy(text, records->bytes + at + SIZE_AT, SIZE_BYTES);
    return integer_parse(text, &said) && said > 0 &&
           (size_t)said == header_size(records->bytes + at);
}

/* Where inside a plain record a header begins: bytes were lost, and nothing else tells. 0 = there
 * is none; *need: bytes it takes to tell, 0 = told. */
static size_t header_inside(const struct record_stream *records, size_t *need)
{
    const uint8_t *end = records->bytes + records->header.record_bytes;
    for (size_t i = 0; i < 2; i++) {
        const uint8_t *from = records->bytes + 1, *found;
        while (from < end &&
               (found = memmem(from, (size_t)(end - from), signatures[i], SIGNATURE_SIZE))) {
            size_t at = (size_t)(found - records->bytes);
            if (records->count < at + EDF_FIXED_BYTES) {
                *need = at + EDF_FIXED_BYTES;
                return 0;
            }
            if (header_at(records, at))
                return at;
            from = found + 1;
        }
    }
    return 0;
}

/* Bytes at the end of the record that may begin a header. */
static size_t signature_across(const struct record_stream *records)
{
    size_t size = (size_t)records->header.record_bytes;
    size_t most = size < SIGNATURE_SIZE ? size : SIGNATURE_SIZE;
    for (size_t k = most - 1; k > 0; k--) {
        if (record_signature(records->bytes + size - k, k))
            return k;
    }
    return 0;
}

static int end_record(struct record_stream *records, size_t *need, struct err *err)
{
    const struct edf_header *header = &records->header;
    int64_t own_ns;
    float *to = records->samples;
    size_t inside = header->plus ? 0 : header_inside(records, need);
    if (*need > 0)
        return ERR_OK;
    if (inside > 0 || !own_onset(records, &own_ns)) {
        skip_to_signature(records, inside > 0 ? "a record is cut short: bytes were lost"
                                              : "a record states no onset: bytes were lost");
        return ERR_OK;
    }
    for (size_t i = 0; i < header->signal_count; i++) {
        const struct edf_signal *signal = &header->signals[i];
        if (!signal->annotations)
            to = decode(signal, records->bytes + signal->at, header->width, to);
    }
    records->delivered = header->plus ? 0 : signature_across(records);
    consume(records, (size_t)header->record_bytes - records->delivered);
    return records->sink.block(records->sink.context, own_ns, records->samples, err);
}

/* Does the best with the bytes there are; *need is 0 then, else how many it takes. */
static int step_header(struct record_stream *records, size_t *need, struct err *err)
{
    *need = 0;
    if (records->count < SIGNATURE_SIZE) {
        *need = SIGNATURE_SIZE;
    } else if (!record_signature(records->bytes, SIGNATURE_SIZE)) {
        skip_to_signature(records, "its first bytes are no header's");
    } else if (records->count < EDF_FIXED_BYTES) {
        *need = EDF_FIXED_BYTES;
    } else {
        size_t size = header_size(records->bytes);
        if (size == 0)
            skip_to_signature(records, "its number of signals is not one from 1 to 1024");
        else if (records->count < size)
            *need = size;
        else
            return end_header(records, size, err);
    }
    return ERR_OK;
}

/* Is a header there where a record should begin? *need: bytes it takes to tell, 0 = told. */
static bool begins_header(const struct record_stream *records, size_t *need)
{
    *need = 0;
    if (records->count == 0 || !record_signature(records->bytes, records->count))
        return false;
    if (records->count >= EDF_FIXED_BYTES)
        return header_at(records, 0);
    *need = records->count < SIGNATURE_SIZE ? records->count + 1 : EDF_FIXED_BYTES;
    return false;
}

static int step_record(struct record_stream *records, size_t *need, struct err *err)
{
    size_t size = (size_t)records->header.record_bytes;
    bool header = begins_header(records, need);
    if (*need > 0)
        return ERR_OK;
    if (header) {
        records->expecting = EXPECT_HEADER;
        records->delivered = 0;
    } else if (records->delivered > 0) {
        consume(records, records->delivered);
        records->delivered = 0;
    } else if (records->count < size) {
        *need = records->count < SIGNATURE_SIZE && size > SIGNATURE_SIZE ? SIGNATURE_SIZE : size;
    } else {
        return end_record(records, need, err);
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
