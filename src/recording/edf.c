/*
 * edf.c - EDF, EDF+C, EDF+D, BDF, BDF+C and BDF+D as recordings: channels, and samples decoded from
 * the mapped file. The header is edf_header.c's, records and annotations are edf_records.c's.
 *
 * A sample's place in the file is arithmetic, so that any stretch is read in constant time. Only
 * the annotation bytes of a + file are read when it opens.
 */
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "recording/edf_impl.h"

static const struct edf *self(const struct recording *recording)
{
    return (const struct edf *)(const void *)recording;
}

/* ---- samples ---- */

/* Little-endian two's complement, whatever the alignment. A 24-bit sample is loaded together with
 * the byte before it, which is always there (the header is), and shifted down: no byte past the
 * end of the file is touched. */
static inline int32_t load16(const uint8_t *at)
{
    int16_t value;
    memcpy(&value, at, sizeof value);
    return value;
}

static inline int32_t load24(const uint8_t *at)
{
    int32_t value;
    memcpy(&value, at - 1, sizeof value);
    return value >> 8;
}

static inline int32_t load(const uint8_t *at, int width)
{
    return width == 2 ? load16(at) : load24(at);
}

static void decode_valid(const struct edf_signal *signal, int width, const uint8_t *from,
                         int64_t count, float *out)
{
    for (int64_t i = 0; i < count; i++) {
        int32_t value = load(from + width * i, width);
        out[i] = value == signal->missing ? NAN : (float)(signal->gain * value + signal->offset);
    }
}

static void decode(const struct edf_signal *signal, int width, const uint8_t *from, int64_t count,
                   float *out)
{
    const double gain = signal->gain, offset = signal->offset;
    if (signal->has_missing) {
        decode_valid(signal, width, from, count, out);
    } else if (width == 2) {
        for (int64_t i = 0; i < count; i++)
            out[i] = (float)(gain * load16(from + 2 * i) + offset);
    } else {
        for (int64_t i = 0; i < count; i++)
            out[i] = (float)(gain * load24(from + 3 * i) + offset);
    }
}

struct extremes {
    int32_t low, high;
};

static void widen16(const uint8_t *from, int64_t count, struct extremes *all)
{
    int16_t low = INT16_MAX, high = INT16_MIN;
    for (int64_t i = 0; i < count; i++) {
        int16_t value;
        memcpy(&value, from + 2 * i, sizeof value);
        low = value < low ? value : low;
        high = value > high ? value : high;
    }
    all->low = low < all->low ? low : all->low;
    all->high = high > all->high ? high : all->high;
}

static void widen24(const uint8_t *from, int64_t count, struct extremes *all)
{
    int32_t low = all->low, high = all->high;
    for (int64_t i = 0; i < count; i++) {
        int32_t value = load24(from + 3 * i);
        low = value < low ? value : low;
        high = value > high ? value : high;
    }
    *all = (struct extremes){low, high};
}

/* Missing samples left out; low > high afterwards: there was none. */
static void widen_valid(const uint8_t *from, int64_t count, int width, int32_t missing,
                        struct extremes *all)
{
    for (int64_t i = 0; i < count; i++) {
        int32_t value = load(from + width * i, width);
        if (value == missing)
            continue;
        all->low = value < all->low ? value : all->low;
        all->high = value > all->high ? value : all->high;
    }
}

/* The longest piece of [first, first + count) inside one record: its bytes and its length. */
static const uint8_t *piece(const struct edf *edf, const struct edf_signal *signal, int64_t first,
                            int64_t count, int64_t *length)
{
    int64_t record = first / signal->samples, within = first % signal->samples;
    int64_t left = signal->samples - within;
    *length = count < left ? count : left;
    return edf->mapped.data + edf->header.bytes + record * edf->header.record_bytes + signal->at +
           within * edf->header.width;
}

static int edf_read(const struct recording *recording, size_t channel, int64_t first, int64_t count,
                    float *out, struct err *err)
{
    (void)err;
    const struct edf *edf = self(recording);
    const struct edf_signal *signal = &edf->header.signals[edf->signal_of[channel]];
    while (count > 0) {
        int64_t length;
        const uint8_t *from = piece(edf, signal, first, count, &length);
        decode(signal, edf->header.width, from, length, out);
        first += length;
        count -= length;
        out += length;
    }
    return ERR_OK;
}

static int edf_minmax(const struct recording *recording, size_t channel, int64_t first,
                      int64_t count, float *low, float *high, struct err *err)
{
    (void)err;
    const struct edf *edf = self(recording);
    const struct edf_signal *signal = &edf->header.signals[edf->signal_of[channel]];
    struct extremes all = {INT32_MAX, INT32_MIN};
    while (count > 0) {
        int64_t length;
        const uint8_t *from = piece(edf, signal, first, count, &length);
        if (signal->has_missing)
            widen_valid(from, length, edf->header.width, signal->missing, &all);
        else if (edf->header.width == 2)
            widen16(from, length, &all);
        else
            widen24(from, length, &all);
        first += length;
        count -= length;
    }
    if (all.low > all.high) {
        *low = *high = NAN;
        return ERR_OK;
    }
    float a = (float)(signal->gain * all.low + signal->offset);
    float b = (float)(signal->gain * all.high + signal->offset);
    *low = a < b ? a : b; /* a negative gain turns them round */
    *high = a < b ? b : a;
    return ERR_OK;
}

static void edf_close(struct recording *recording)
{
    struct edf *edf = (struct edf *)(void *)recording;
    edf->files->unmap(edf->files, &edf->mapped);
    free(edf->stretches);
    free(edf->annotations);
}

static const struct recording_ops edf_ops = {edf_read, edf_minmax, edf_close};

/* ---- channels ---- */

/* Whole samples of a signal in the record that was cut off. */
static int64_t tail_samples(const struct edf *edf, const struct edf_signal *signal)
{
    int64_t bytes = edf->tail - signal->at;
    int64_t samples = bytes > 0 ? bytes / edf->header.width : 0;
    return samples < signal->samples ? samples : signal->samples;
}

static int channel_runs(struct edf *edf, const struct edf_signal *signal, struct channel *channel,
                        struct err *err)
{
    struct run *runs = arena_alloc(&edf->base.arena, edf->stretch_count, sizeof *runs);
    int64_t record_ns = edf->header.record_ns, tail = tail_samples(edf, signal);
    if (!runs)
        return err_memory(err, "a channel's runs");
    channel->runs = runs;
    for (size_t i = 0; i < edf->stretch_count && signal->samples > 0; i++) {
        const struct stretch *stretch = &edf->stretches[i];
        int64_t more = i + 1 == edf->stretch_count ? tail : 0;
        struct run run = {stretch->start_ns,
                          stretch->count * record_ns + mul_div(more, record_ns, signal->samples),
                          stretch->first * signal->samples,
                          stretch->count * signal->samples + more};
        if (run.count == 0 || run.span_ns <= 0)
            continue;
        runs[channel->run_count++] = run;
        channel->samples = run.first + run.count;
    }
    if (channel->run_count > 0)
        channel->rate_hz = (double)signal->samples * 1e9 / (double)record_ns;
    return ERR_OK;
}

/* Records of no duration hold one sample each, at the record's onset: an irregular channel. */
static int channel_times(struct edf *edf, const struct edf_signal *signal, struct channel *channel,
                         struct err *err)
{
    int64_t *times =
        arena_alloc(&edf->base.arena, (size_t)(edf->records * signal->samples), sizeof *times);
    if (!times)
        return err_memory(err, "a channel's times");
    channel->times_ns = times;
    for (size_t i = 0; i < edf->stretch_count; i++) {
        const struct stretch *stretch = &edf->stretches[i];
        for (int64_t k = 0; k < stretch->count * signal->samples; k++)
            times[channel->samples++] = stretch->start_ns;
    }
    return ERR_OK;
}

static int make_channels(struct edf *edf, struct err *err)
{
    const struct edf_header *header = &edf->header;
    struct recording *base = &edf->base;
    base->channels = arena_alloc(&base->arena, header->signal_count, sizeof *base->channels);
    edf->signal_of = arena_alloc(&base->arena, header->signal_count, sizeof *edf->signal_of);
    if (!base->channels || !edf->signal_of)
        return err_memory(err, "the channels");
    size_t count = 0;
    int failed = ERR_OK;
    for (size_t i = 0; i < header->signal_count && !failed; i++) {
        const struct edf_signal *signal = &header->signals[i];
        if (signal->annotations)
            continue;
        struct channel *channel = &base->channels[count];
        *channel = (struct channel){.label = signal->label,
                                    .unit = signal->unit,
                                    .transducer = signal->transducer,
                                    .prefilter = signal->prefilter,
                                    .physical_min = signal->physical_min,
                                    .physical_max = signal->physical_max};
        edf->signal_of[count++] = i;
        failed = header->record_ns > 0 ? channel_runs(edf, signal, channel, err)
                                       : channel_times(edf, signal, channel, err);
    }
    base->info.channels = base->channels;
    base->info.channel_count = count;
    return failed;
}

static int make_gaps(struct edf *edf, struct err *err)
{
    size_t room = edf->stretch_count > 0 ? edf->stretch_count : 1;
    struct gap *gaps = arena_alloc(&edf->base.arena, room, sizeof *gaps);
    if (!gaps)
        return err_memory(err, "the gaps");
    edf->base.info.gaps = gaps;
    if (edf->header.record_ns == 0)
        return ERR_OK;
    for (size_t i = 1; i < edf->stretch_count; i++) {
        const struct stretch *before = &edf->stretches[i - 1];
        int64_t end_ns = before->start_ns + before->count * edf->header.record_ns;
        gaps[edf->base.info.gap_count++] =
            (struct gap){end_ns, edf->stretches[i].start_ns - end_ns};
    }
    return ERR_OK;
}

/* ---- opening ---- */

static bool recognise(const char *path, const uint8_t *head, size_t size)
{
    static const uint8_t edf_magic[] = {'0', ' ', ' ', ' ', ' ', ' ', ' ', ' '};
    static const uint8_t bdf_magic[] = {0xFF, 'B', 'I', 'O', 'S', 'E', 'M', 'I'};
    (void)path;
    return size >= 8 && (memcmp(head, edf_magic, 8) == 0 || memcmp(head, bdf_magic, 8) == 0);
}

static int64_t end_ns(const struct edf *edf)
{
    int64_t end = 0;
    if (edf->stretch_count > 0 && edf->header.record_ns > 0) {
        const struct stretch *last = &edf->stretches[edf->stretch_count - 1];
        end = last->start_ns + last->count * edf->header.record_ns;
    }
    for (size_t i = 0; i < edf->base.info.channel_count; i++) {
        const struct channel *channel = &edf->base.channels[i];
        if (channel->run_count > 0 && run_end_ns(&channel->runs[channel->run_count - 1]) > end)
            end = run_end_ns(&channel->runs[channel->run_count - 1]);
        if (channel->times_ns && channel->samples > 0)
            end = channel->times_ns[channel->samples - 1] + 1;
    }
    /* Without a signal, what is annotated is what was recorded. */
    for (size_t i = 0; edf->base.info.channel_count == 0 && i < edf->annotation_count; i++) {
        int64_t last = edf->annotations[i].onset_ns + edf->annotations[i].span_ns;
        end = last > end ? last : end;
    }
    return end;
}

static int fill(struct edf *edf, struct err *err)
{
    int failed = edf_header_read(&edf->base, edf->mapped.data, edf->mapped.size, &edf->header, err);
    if (!failed)
        failed = edf_records_read(edf, err);
    if (!failed)
        failed = make_channels(edf, err);
    if (!failed)
        failed = make_gaps(edf, err);
    if (failed)
        return failed;
    struct recording_info *info = &edf->base.info;
    info->format = edf->header.format;
    info->subject = edf->header.subject;
    info->equipment = edf->header.equipment;
    info->start_civil_ns = edf->header.start_civil_ns;
    if (info->start_civil_ns != NS_NONE)
        info->start_civil_ns += edf->origin_ns;
    info->span_ns = end_ns(edf);
    return ERR_OK;
}

static int edf_open(const char *path, const struct reader_options *options,
                    const struct file_space *files, struct recording **out, struct err *err)
{
    (void)options;
    struct edf *edf = calloc(1, sizeof *edf);
    if (!edf)
        return err_memory(err, path);
    edf->base.ops = &edf_ops;
    edf->files = files;
    edf->base.info.path = arena_string(&edf->base.arena, path);
    int failed =
        edf->base.info.path ? files->map(files, path, &edf->mapped, err) : err_memory(err, path);
    if (!failed)
        failed = fill(edf, err);
    if (failed)
        recording_close(&edf->base);
    else
        *out = &edf->base;
    return failed;
}

const struct reader edf_reader = {"edf", ".edf .bdf  (EDF, EDF+C, EDF+D, BDF, BDF+C, BDF+D)",
                                  recognise, edf_open};
