/*
 * live_layout.c - copying a stream's header, and the records that it makes. Ranges are
 * live_range.c's.
 */
#include "case/live_layout.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "base/ns.h"
#include "base/str.h"

/* Room for a record's onset, and no more: nothing else is annotated in a live file. */
enum { ANNOTATION_BYTES = 30 };

void live_ascii(const char *text, char *out, size_t size)
{
    size_t length = 0;
    for (uint32_t code; (code = utf8_next(&text)) != 0;) {
        char one[2] = {code < 32 || code > 126 ? '?' : (char)code, '\0'};
        const char *put = code == 0xB5 || code == 0x3BC ? "u" : code == 0xB0 ? "deg" : one;
        if (length + strlen(put) >= size)
            break;
        memcpy(out + length, put, strlen(put));
        length += strlen(put);
    }
    out[length] = '\0';
}

/* ---- records ---- */

/* Samples that so many in a block make in record_ns; 0 when that is no whole number. */
static int64_t in_record(const struct live_layout *layout, int block_samples, int64_t record_ns)
{
    __int128 samples = (__int128)block_samples * layout->blocks * record_ns;
    if (samples % layout->block_ns != 0 || samples / layout->block_ns > INT32_MAX)
        return 0;
    return (int64_t)(samples / layout->block_ns);
}

static bool fits_all(const struct live_layout *layout, int64_t record_ns)
{
    if (ns_from_s(edf_number(s_from_ns(record_ns))) != record_ns)
        return false;
    for (size_t i = 0; i < layout->channel_count; i++) {
        if (in_record(layout, layout->channels[i].block_samples, record_ns) == 0)
            return false;
    }
    return true;
}

static void set_samples(struct live_layout *layout, int64_t numerator, int64_t denominator)
{
    layout->record_total = 0;
    layout->most_samples = 0;
    for (size_t i = 0; i < layout->channel_count; i++) {
        struct live_channel *channel = &layout->channels[i];
        channel->record_samples = (int)mul_div(channel->block_samples, numerator, denominator);
        layout->record_total += (size_t)channel->record_samples;
        if (channel->record_samples > layout->most_samples)
            layout->most_samples = channel->record_samples;
    }
}

/* At an odd rate: so many blocks that their duration can be written exactly, or else a second's
 * worth whose duration is rounded, by less than 1 ppm. */
static void plan_odd(struct live_layout *layout)
{
    int64_t count = 1 + mul_div(100 * NS_PER_MS, layout->blocks, layout->block_ns);
    int64_t most = mul_div(10 * NS_PER_S, layout->blocks, layout->block_ns);
    for (; count <= most; count++) {
        int64_t ns = mul_div(count, layout->block_ns, layout->blocks);
        if (mul_div(ns, layout->blocks, layout->block_ns) == count && fits_all(layout, ns))
            break;
    }
    if (count > most)
        count = 1 + mul_div(NS_PER_S, layout->blocks, layout->block_ns);
    int64_t ns = mul_div(count, layout->block_ns, layout->blocks);
    layout->record_ns = ns_from_s(edf_number(s_from_ns(ns)));
    set_samples(layout, count, 1);
}

static void plan_records(struct live_layout *layout)
{
    static const int durations_ms[] = {100, 125, 200, 250, 500, 1000, 2000, 5000, 10000};
    for (size_t i = 0; i < sizeof durations_ms / sizeof *durations_ms; i++) {
        int64_t ns = durations_ms[i] * NS_PER_MS;
        if (fits_all(layout, ns)) {
            layout->record_ns = ns;
            set_samples(layout, mul_div(ns, layout->blocks, 1), layout->block_ns);
            return;
        }
    }
    plan_odd(layout);
}

double live_channel_rate_hz(const struct live_layout *layout, size_t channel)
{
    return (double)layout->channels[channel].record_samples * 1e9 / (double)layout->record_ns;
}

/* ---- copying ---- */

static int copy_channel(const struct stream_channel *from, struct live_channel *out,
                        struct err *err)
{
    out->label = strdup(from->label);
    out->unit = strdup(from->unit);
    if (!out->label || !out->unit)
        return err_memory(err, "a stream's channels");
    out->role = from->role;
    out->physical_min = from->physical_min;
    out->physical_max = from->physical_max;
    out->digital_min = from->digital_min;
    out->digital_max = from->digital_max;
    out->block_samples = from->samples;
    live_ascii(from->label, out->file_label, sizeof out->file_label);
    live_ascii(from->unit, out->file_unit, sizeof out->file_unit);
    /* A label that is too long for its field is kept where there is room. */
    bool cut = strlen(out->file_label) < strlen(from->label);
    live_ascii(cut && !*from->transducer ? from->label : from->transducer, out->transducer,
               sizeof out->transducer);
    live_ascii(from->prefilter, out->prefilter, sizeof out->prefilter);
    live_layout_set_range(out, 0);
    return ERR_OK;
}

static int check(const struct stream_header *header, struct err *err)
{
    bool good = header->channel_count > 0 && header->block_ns > 0 && header->blocks > 0;
    for (size_t i = 0; i < header->channel_count && good; i++)
        good = header->channels[i].samples > 0;
    return good ? ERR_OK : err_set(err, ERR_FORMAT, "the stream's header has no channel or rate");
}

int live_layout_new(const struct stream_header *header, struct live_layout *out, struct err *err)
{
    struct live_layout made = {.block_ns = header->block_ns, .blocks = header->blocks};
    void *memory = NULL;
    int failed = check(header, err);
    if (!failed)
        failed = array_new_zero(&memory, header->channel_count, sizeof *made.channels, err);
    if (failed)
        return failed;
    made.channels = memory;
    made.channel_count = header->channel_count;
    for (size_t i = 0; i < made.channel_count && !failed; i++) {
        failed = copy_channel(&header->channels[i], &made.channels[i], err);
        made.block_total += (size_t)made.channels[i].block_samples;
    }
    if (failed) {
        live_layout_free(&made);
        return failed;
    }
    plan_records(&made);
    *out = made;
    return ERR_OK;
}

int live_layout_copy(const struct live_layout *from, struct live_layout *out, struct err *err)
{
    struct live_layout made = *from;
    void *memory = NULL;
    int failed = array_new_zero(&memory, from->channel_count, sizeof *made.channels, err);
    if (failed)
        return failed;
    made.channels = memory;
    for (size_t i = 0; i < from->channel_count; i++) {
        struct live_channel *channel = &made.channels[i];
        *channel = from->channels[i];
        channel->label = strdup(from->channels[i].label);
        channel->unit = strdup(from->channels[i].unit);
        if (!channel->label || !channel->unit)
            failed = err_memory(err, "a stream's channels");
    }
    if (failed)
        live_layout_free(&made);
    else
        *out = made;
    return failed;
}

void live_layout_free(struct live_layout *layout)
{
    for (size_t i = 0; i < layout->channel_count; i++) {
        free(layout->channels[i].label);
        free(layout->channels[i].unit);
    }
    free(layout->channels);
    *layout = (struct live_layout){0};
}

static bool same_channel(const struct live_channel *channel, const struct stream_channel *other)
{
    return strcmp(channel->label, other->label) == 0 && strcmp(channel->unit, other->unit) == 0 &&
           channel->block_samples == other->samples &&
           channel->physical_min == other->physical_min &&
           channel->physical_max == other->physical_max &&
           channel->digital_min == other->digital_min && channel->digital_max == other->digital_max;
}

bool live_layout_matches(const struct live_layout *layout, const struct stream_header *header)
{
    if (layout->channel_count != header->channel_count ||
        (__int128)layout->block_ns * header->blocks != (__int128)header->block_ns * layout->blocks)
        return false;
    for (size_t i = 0; i < layout->channel_count; i++) {
        if (!same_channel(&layout->channels[i], &header->channels[i]))
            return false;
    }
    return true;
}

int live_layout_spec(const struct live_layout *layout, struct edf_spec *spec,
                     struct edf_channel_spec **channels, struct err *err)
{
    void *memory = NULL;
    int failed = array_new(&memory, layout->channel_count, sizeof **channels, err);
    if (failed)
        return failed;
    *channels = memory;
    for (size_t i = 0; i < layout->channel_count; i++) {
        const struct live_channel *channel = &layout->channels[i];
        (*channels)[i] = (struct edf_channel_spec){
            .label = channel->file_label,
            .unit = channel->file_unit,
            .transducer = channel->transducer,
            .prefilter = channel->prefilter,
            .physical_min = channel->low,
            .physical_max = channel->high,
            .digital_min = channel->digital_low,
            .digital_max = channel->digital_high,
            .samples_per_record = channel->record_samples,
        };
    }
    *spec = (struct edf_spec){.bdf = true,
                              .discontinuous = true,
                              .lowest_is_missing = true,
                              .record_ns = layout->record_ns,
                              .annotation_bytes = ANNOTATION_BYTES,
                              .channels = *channels,
                              .channel_count = layout->channel_count};
    return ERR_OK;
}
