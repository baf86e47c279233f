/*
 * wfdb.c - WFDB records as recordings: channels, samples, annotations brought together. Headers,
 * signal files and segments, packed samples and annotation files are read in files of their own.
 *
 * Checksums of the header are not verified: that would mean reading every sample when the record
 * opens.
 */
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "recording/wfdb_annotations.h"
#include "recording/wfdb_format.h"
#include "recording/wfdb_impl.h"

static const struct wfdb *self(const struct recording *recording)
{
    return (const struct wfdb *)(const void *)recording;
}

/* ---- samples ---- */

static void decode(const struct wfdb *wfdb, const struct piece *piece, int64_t first, int64_t count,
                   float *out)
{
    const struct wfdb_signal *signal = piece->signal;
    const struct signal_file *file = &wfdb->opened[piece->file];
    const uint8_t *bytes = file->mapped.data + signal->offset;
    int64_t per_frame = signal->per_frame;
    int32_t missing = 0;
    bool has_missing = wfdb_format_missing(signal->format, &missing);
    for (int64_t i = 0; i < count; i++) {
        int64_t k = first + i + piece->skip;
        int64_t index = k / per_frame * piece->frame + piece->place + k % per_frame;
        int32_t value =
            file->decoded ? file->decoded[index] : wfdb_format_get(signal->format, bytes, index);
        out[i] = has_missing && value == missing
                     ? NAN
                     : (float)(((double)value - signal->baseline) / signal->gain);
    }
}

/* The piece that holds a sample: the last that begins at or before it. */
static size_t piece_of(const struct pieces *pieces, int64_t sample)
{
    size_t low = 0, high = pieces->count;
    while (high - low > 1) {
        size_t middle = low + (high - low) / 2;
        if (pieces->items[middle].first <= sample)
            low = middle;
        else
            high = middle;
    }
    return low;
}

static int wfdb_read(const struct recording *recording, size_t channel, int64_t first,
                     int64_t count, float *out, struct err *err)
{
    (void)err;
    const struct wfdb *wfdb = self(recording);
    const struct pieces *pieces = &wfdb->pieces[channel];
    for (size_t i = piece_of(pieces, first); count > 0; i++) {
        const struct piece *piece = &pieces->items[i];
        int64_t within = first - piece->first;
        int64_t step = piece->count - within < count ? piece->count - within : count;
        decode(wfdb, piece, within, step, out);
        first += step;
        out += step;
        count -= step;
    }
    return ERR_OK;
}

static void wfdb_close(struct recording *recording)
{
    struct wfdb *wfdb = (struct wfdb *)(void *)recording;
    for (size_t i = 0; i < wfdb->opened_count; i++) {
        wfdb->files->unmap(wfdb->files, &wfdb->opened[i].mapped);
        free(wfdb->opened[i].path);
        free(wfdb->opened[i].decoded);
    }
    for (size_t i = 0; i < wfdb->channel_count; i++) {
        free(wfdb->pieces[i].items);
        free(wfdb->pieces[i].runs);
    }
    free(wfdb->opened);
    free(wfdb->annotations);
}

static const struct recording_ops wfdb_ops = {wfdb_read, NULL, wfdb_close};

/* ---- channels ---- */

static int make_channels(struct wfdb *wfdb, const struct wfdb_header *layout, struct err *err)
{
    struct recording *base = &wfdb->base;
    base->channels = arena_alloc(&base->arena, wfdb->channel_count + 1, sizeof *base->channels);
    if (!base->channels)
        return err_memory(err, "the channels");
    for (size_t i = 0; i < wfdb->channel_count; i++) {
        const struct pieces *pieces = &wfdb->pieces[i];
        const struct piece *last = pieces->count ? &pieces->items[pieces->count - 1] : NULL;
        const struct wfdb_signal *signal = last ? pieces->items[0].signal : &layout->signals[i];
        base->channels[i] = (struct channel){
            .label = layout->signals[i].description,
            .unit = signal->unit,
            .transducer = "",
            .prefilter = "",
            .samples = last ? last->first + last->count : 0,
            .runs = pieces->runs,
            .run_count = pieces->run_count,
            .rate_hz = wfdb->header.rate_hz * (double)signal->per_frame,
        };
    }
    base->info.channels = base->channels;
    base->info.channel_count = wfdb->channel_count;
    return ERR_OK;
}

static int by_start(const void *a, const void *b)
{
    const struct run *first = a, *second = b;
    return (first->start_ns > second->start_ns) - (first->start_ns < second->start_ns);
}

/* All runs of all channels, by their start; *count is set, caller frees. */
static int all_runs(const struct wfdb *wfdb, struct run **out, size_t *count, struct err *err)
{
    void *memory = NULL;
    *count = 0;
    for (size_t i = 0; i < wfdb->channel_count; i++)
        *count += wfdb->pieces[i].run_count;
    int failed = array_new(&memory, *count, sizeof **out, err);
    if (failed)
        return failed;
    *out = memory;
    for (size_t i = 0, at = 0; i < wfdb->channel_count; i++) {
        const struct pieces *pieces = &wfdb->pieces[i];
        if (pieces->run_count > 0)
            memcpy(*out + at, pieces->runs, pieces->run_count * sizeof **out);
        at += pieces->run_count;
    }
    if (*count > 0)
        qsort(*out, *count, sizeof **out, by_start);
    return ERR_OK;
}

/* A gap is where no channel has a sample. */
static int make_gaps(struct wfdb *wfdb, struct err *err)
{
    struct run *runs = NULL;
    size_t count;
    int failed = all_runs(wfdb, &runs, &count, err);
    struct gap *gaps = failed ? NULL : arena_alloc(&wfdb->base.arena, count + 1, sizeof *gaps);
    if (!failed && !gaps)
        failed = err_memory(err, "the gaps");
    int64_t end = count > 0 && !failed ? run_end_ns(&runs[0]) : 0;
    for (size_t i = 1; i < count && !failed; i++) {
        if (runs[i].start_ns > end + 1)
            gaps[wfdb->base.info.gap_count++] = (struct gap){end, runs[i].start_ns - end};
        end = run_end_ns(&runs[i]) > end ? run_end_ns(&runs[i]) : end;
    }
    wfdb->base.info.gaps = gaps;
    free(runs);
    return failed;
}

/* ---- annotations, start, end ---- */

/* The record's path without ".hea". */
static char *record_path(struct wfdb *wfdb, const char *suffix)
{
    size_t length = strlen(wfdb->path);
    length -= path_has_suffix(wfdb->path, ".hea") ? 4 : 0;
    return arena_printf(&wfdb->base.arena, "%.*s.%s", (int)length, wfdb->path, suffix);
}

/* The first there is of the usual annotators' names (common practice): reference ones first. */
static int read_annotations(struct wfdb *wfdb, struct err *err)
{
    static const char *const annotators[] = {"atr", "ann", "ari", "ecg", "qrs"};
    for (size_t i = 0; i < sizeof annotators / sizeof *annotators; i++) {
        struct mapped mapped;
        struct err why = {0};
        char *path = record_path(wfdb, annotators[i]);
        if (!path)
            return err_memory(err, "annotations");
        if (wfdb->files->map(wfdb->files, path, &mapped, NULL))
            continue;
        int failed = wfdb_annotations_read(mapped.data, mapped.size, path, wfdb->header.rate_hz,
                                           &wfdb->base.arena, &wfdb->annotations,
                                           &wfdb->base.info.annotation_count, &why);
        wfdb->files->unmap(wfdb->files, &mapped);
        wfdb->base.info.annotations = wfdb->annotations;
        if (failed == ERR_MEMORY)
            return err_set(err, failed, "%s", why.text);
        return failed ? recording_note(&wfdb->base, err, "annotations are left out: %s", why.text)
                      : ERR_OK;
    }
    return ERR_OK;
}

static int find_start(struct wfdb *wfdb, struct err *err)
{
    char text[TIME_TEXT_SIZE];
    wfdb->base.info.start_civil_ns = wfdb->header.start_civil_ns;
    if (wfdb->header.start_civil_ns != NS_NONE || wfdb->header.time_of_day_ns == NS_NONE)
        return ERR_OK;
    ns_format_day(wfdb->header.time_of_day_ns, 3, text);
    return recording_note(&wfdb->base, err, "starts at %s of an unknown day", text);
}

static int64_t end_ns(const struct wfdb *wfdb)
{
    int64_t end = wfdb_frames_ns(wfdb, (double)wfdb->header.frames);
    for (size_t i = 0; i < wfdb->channel_count; i++) {
        const struct pieces *pieces = &wfdb->pieces[i];
        if (pieces->run_count > 0 && run_end_ns(&pieces->runs[pieces->run_count - 1]) > end)
            end = run_end_ns(&pieces->runs[pieces->run_count - 1]);
    }
    return end;
}

/* The further files the record lives in, for its digest. */
static int list_parts(struct wfdb *wfdb, struct err *err)
{
    wfdb->parts = arena_alloc(&wfdb->base.arena, wfdb->opened_count + 1, sizeof *wfdb->parts);
    if (!wfdb->parts)
        return err_memory(err, "the files");
    for (size_t i = 0; i < wfdb->opened_count; i++)
        wfdb->parts[i] = wfdb->opened[i].path;
    wfdb->base.info.parts = wfdb->parts;
    wfdb->base.info.part_count = wfdb->opened_count;
    return ERR_OK;
}

static int fill(struct wfdb *wfdb, struct err *err)
{
    const struct wfdb_header *layout;
    int failed = wfdb_segments_read(wfdb, &layout, err);
    if (!failed && wfdb->missing_files > 0)
        failed = recording_note(&wfdb->base, err,
                                "%zu files of its segments are not there; taken as gaps",
                                wfdb->missing_files);
    if (!failed)
        failed = make_channels(wfdb, layout, err);
    if (!failed)
        failed = make_gaps(wfdb, err);
    if (!failed)
        failed = read_annotations(wfdb, err);
    if (!failed)
        failed = find_start(wfdb, err);
    if (!failed)
        failed = list_parts(wfdb, err);
    wfdb->base.info.format = "WFDB";
    wfdb->base.info.subject = wfdb->base.info.equipment = "";
    wfdb->base.info.span_ns = failed ? 0 : end_ns(wfdb);
    return failed;
}

static bool recognise(const char *path, const uint8_t *head, size_t size)
{
    return path_has_suffix(path, ".hea") && memchr(head, 0, size) == NULL;
}

static int wfdb_open(const char *path, const struct reader_options *options,
                     const struct file_space *files, struct recording **out, struct err *err)
{
    (void)options;
    struct wfdb *wfdb = calloc(1, sizeof *wfdb);
    if (!wfdb)
        return err_memory(err, path);
    wfdb->base.ops = &wfdb_ops;
    wfdb->files = files;
    wfdb->path = wfdb->base.info.path = arena_string(&wfdb->base.arena, path);
    int failed = wfdb->path ? fill(wfdb, err) : err_memory(err, path);
    if (failed)
        recording_close(&wfdb->base);
    else
        *out = &wfdb->base;
    return failed;
}

const struct reader wfdb_reader = {
    "wfdb", ".hea  (formats 8 16 24 32 61 80 160 212 310 311, several segments)", recognise,
    wfdb_open};
