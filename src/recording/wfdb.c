/*
 * wfdb.c - WFDB records: header, signal files, segments, annotations brought together. The text
 * of headers, packed samples and annotation files are read in files of their own.
 *
 * Each channel is a list of pieces, one for each segment that has it. Checksums of the header are
 * not verified: that would mean reading every sample when the record opens.
 */
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "base/str.h"
#include "recording/reader.h"
#include "recording/wfdb_annotations.h"
#include "recording/wfdb_format.h"
#include "recording/wfdb_header.h"

struct signal_file {
    char *path;
    struct mapped mapped;
    int32_t *decoded; /* format 8: running values of all samples; NULL otherwise */
};

/* A stretch of a channel inside one segment. */
struct piece {
    int64_t first, count; /* samples of the channel */
    const struct wfdb_signal *signal;
    size_t file;
    int64_t place; /* of the signal in a frame */
    int64_t frame; /* samples of all signals of the file in a frame */
    int64_t skip;  /* samples of the signal before the first of the piece */
};

struct pieces {
    struct piece *items;
    size_t count, room;
    struct run *runs;
    size_t run_count, run_room;
};

struct wfdb {
    struct recording base;
    const struct file_space *files;
    const char *path;
    struct wfdb_header header;
    struct signal_file *opened;
    size_t opened_count, opened_room;
    struct pieces *pieces; /* of each channel, shape (channel_count) */
    size_t channel_count;
    struct annotation *annotations;
    const char **parts;
    size_t missing_files;
};

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

/* ---- signal files ---- */

/* Format 8 holds first differences of each signal: every value depends on all before it. */
static int undo_differences(struct signal_file *file, const struct wfdb_signal *signals,
                            size_t count, int64_t frame, struct err *err)
{
    int64_t samples = wfdb_format_samples(8, file->mapped.size - (size_t)signals[0].offset);
    void *memory = NULL;
    int failed = array_new(&memory, (size_t)samples, sizeof *file->decoded, err);
    if (failed)
        return failed;
    file->decoded = memory;
    const uint8_t *bytes = file->mapped.data + signals[0].offset;
    int64_t place = 0;
    for (size_t i = 0; i < count; i++) {
        int32_t value = (int32_t)signals[i].first_value;
        for (int64_t k = 0;; k++) {
            int64_t index = k / signals[i].per_frame * frame + place + k % signals[i].per_frame;
            if (index >= samples)
                break;
            value = (int32_t)((uint32_t)value + (uint32_t)wfdb_format_get(8, bytes, index));
            file->decoded[index] = value;
        }
        place += signals[i].per_frame;
    }
    return ERR_OK;
}

static int open_file(struct wfdb *wfdb, const char *header_path, const char *name, size_t *index,
                     struct err *err)
{
    int failed = array_reserve((void **)&wfdb->opened, &wfdb->opened_room, wfdb->opened_count + 1,
                               sizeof *wfdb->opened, err);
    if (failed)
        return failed;
    if (strchr(name, '/'))
        return err_set(err, ERR_FORMAT, "%s: names the file '%s' outside its own folder",
                       header_path, name);
    struct signal_file made = {.path = path_beside(header_path, name)};
    if (!made.path)
        return err_memory(err, name);
    failed = wfdb->files->map(wfdb->files, made.path, &made.mapped, err);
    if (failed) {
        free(made.path);
        return failed;
    }
    *index = wfdb->opened_count;
    wfdb->opened[wfdb->opened_count++] = made;
    return ERR_OK;
}

/* ---- segments ---- */

struct segment {
    const struct wfdb_header *header;
    const char *path;    /* of its header */
    int64_t start_frame; /* in the record */
    int64_t frames;      /* it should have; 0 = as many as there are */
};

/* Which channel of the record a signal of a segment is: its place in a fixed layout, its
 * description in a variable one (the second of one name is the second there too); channel_count
 * when it is none. */
static size_t channel_of(const struct wfdb *wfdb, const struct wfdb_header *layout,
                         const struct wfdb_header *header, size_t signal)
{
    const char *wanted = header->signals[signal].description;
    size_t before = 0;
    if (!layout || layout == header)
        return signal;
    for (size_t i = 0; i < signal; i++)
        before += strcmp(header->signals[i].description, wanted) == 0;
    for (size_t i = 0; i < wfdb->channel_count; i++) {
        if (strcmp(layout->signals[i].description, wanted) == 0 && before-- == 0)
            return i;
    }
    return wfdb->channel_count;
}

static int64_t frames_to_ns(const struct wfdb *wfdb, double frames)
{
    double ns = frames * 1e9 / wfdb->header.rate_hz;
    return ns < 9e18 ? (int64_t)llround(ns) : INT64_MAX / 2;
}

/* Adds a piece, and lengthens the last run when the piece follows it without a break. */
static int add_piece(struct wfdb *wfdb, size_t channel, struct piece piece, int64_t start_frame,
                     struct err *err)
{
    struct pieces *pieces = &wfdb->pieces[channel];
    const struct piece *before = pieces->count ? &pieces->items[pieces->count - 1] : NULL;
    piece.first = before ? before->first + before->count : 0;
    int failed = array_reserve((void **)&pieces->items, &pieces->room, pieces->count + 1,
                               sizeof *pieces->items, err);
    if (!failed)
        failed = array_reserve((void **)&pieces->runs, &pieces->run_room, pieces->run_count + 1,
                               sizeof *pieces->runs, err);
    if (failed)
        return failed;
    pieces->items[pieces->count++] = piece;
    double per_frame = (double)piece.signal->per_frame;
    int64_t start = frames_to_ns(wfdb, (double)start_frame);
    int64_t end = frames_to_ns(wfdb, (double)start_frame + (double)piece.count / per_frame);
    struct run *last = pieces->run_count ? &pieces->runs[pieces->run_count - 1] : NULL;
    if (last && llabs(run_end_ns(last) - start) <= 1 &&
        last->count % piece.signal->per_frame == 0) {
        last->span_ns = end - last->start_ns;
        last->count += piece.count;
    } else {
        pieces->runs[pieces->run_count++] =
            (struct run){start, end > start ? end - start : 1, piece.first, piece.count};
    }
    return ERR_OK;
}

/* Signals [first, first + count) of a segment share one file. */
static int add_group(struct wfdb *wfdb, const struct wfdb_header *layout,
                     const struct segment *segment, size_t first, size_t count, struct err *err)
{
    const struct wfdb_signal *signals = &segment->header->signals[first];
    int64_t frame = 0, place = 0;
    size_t file = 0;
    int failed = open_file(wfdb, segment->path, signals[0].file, &file, err);
    if (failed)
        return failed;
    struct signal_file *opened = &wfdb->opened[file];
    for (size_t i = 0; i < count; i++)
        frame += signals[i].per_frame;
    if (signals[0].offset > (int64_t)opened->mapped.size)
        return err_set(err, ERR_FORMAT,
                       "%s: ends before byte %lld, where its header says samples "
                       "begin",
                       opened->path, (long long)signals[0].offset);
    if (signals[0].format == 8)
        failed = undo_differences(opened, signals, count, frame, err);
    int64_t samples =
        wfdb_format_samples(signals[0].format, opened->mapped.size - (size_t)signals[0].offset);
    for (size_t i = 0; i < count && !failed; i++) {
        int64_t frames = samples / frame - signals[i].skew;
        if (segment->frames > 0 && segment->frames < frames)
            frames = segment->frames;
        size_t channel = channel_of(wfdb, layout, segment->header, first + i);
        struct piece piece = {.count = frames * signals[i].per_frame,
                              .signal = &signals[i],
                              .file = file,
                              .place = place,
                              .frame = frame,
                              .skip = signals[i].skew * signals[i].per_frame};
        place += signals[i].per_frame;
        if (frames > 0 && channel < wfdb->channel_count)
            failed = add_piece(wfdb, channel, piece, segment->start_frame, err);
    }
    return failed;
}

static int check_signal(const struct segment *segment, size_t i, const struct wfdb_signal *head,
                        struct err *err)
{
    const struct wfdb_signal *signal = &segment->header->signals[i];
    if (!wfdb_format_known(signal->format))
        return err_set(err, ERR_FORMAT,
                       "%s: signal '%s' is in format %d, which this program does not read",
                       segment->path, signal->description, signal->format);
    if (signal->format != head->format || signal->offset != head->offset)
        return err_set(err, ERR_FORMAT,
                       "%s: signals that share the file %s differ in format or "
                       "offset",
                       segment->path, signal->file);
    return ERR_OK;
}

/* All signal files of a segment. In a record of many segments a missing file is a gap, told once;
 * alone, it is an error. */
static int add_segment(struct wfdb *wfdb, const struct wfdb_header *layout,
                       const struct segment *segment, struct err *err)
{
    const struct wfdb_header *header = segment->header;
    for (size_t first = 0; first < header->signal_count;) {
        size_t end = first + 1;
        int failed = ERR_OK;
        while (end < header->signal_count &&
               strcmp(header->signals[end].file, header->signals[first].file) == 0)
            end++;
        bool null = header->signals[first].format == 0;
        for (size_t i = first; i < end && !null && !failed; i++)
            failed = check_signal(segment, i, &header->signals[first], err);
        if (!failed && !null)
            failed = add_group(wfdb, layout, segment, first, end - first, err);
        if (failed == ERR_IO && wfdb->header.segment_count > 0) {
            wfdb->missing_files++;
            failed = ERR_OK;
        }
        if (failed)
            return failed;
        first = end;
    }
    return ERR_OK;
}

static int read_header(struct wfdb *wfdb, const char *path, struct wfdb_header *out,
                       struct err *err)
{
    struct mapped mapped;
    int failed = wfdb->files->map(wfdb->files, path, &mapped, err);
    if (failed)
        return failed;
    failed =
        wfdb_header_read((const char *)mapped.data, mapped.size, path, &wfdb->base.arena, out, err);
    wfdb->files->unmap(wfdb->files, &mapped);
    return failed;
}

static int segment_header(struct wfdb *wfdb, const char *name, struct wfdb_header *header,
                          const char **path, struct err *err)
{
    if (strchr(name, '/'))
        return err_set(err, ERR_FORMAT, "%s: names the segment '%s' outside its own folder",
                       wfdb->path, name);
    char *file = arena_printf(&wfdb->base.arena, "%s.hea", name);
    char *beside = file ? path_beside(wfdb->path, file) : NULL;
    *path = beside ? arena_string(&wfdb->base.arena, beside) : NULL;
    free(beside);
    if (!*path)
        return err_memory(err, name);
    int failed = read_header(wfdb, *path, header, err);
    if (!failed && (header->segment_count > 0 ||
                    fabs(header->rate_hz - wfdb->header.rate_hz) > 1e-9 * header->rate_hz))
        failed = err_set(err, ERR_FORMAT,
                         "%s: a segment must be at its record's rate and have no "
                         "segments itself",
                         *path);
    return failed;
}

/* ---- channels ---- */

static int make_pieces(struct wfdb *wfdb, size_t count, struct err *err)
{
    wfdb->channel_count = count;
    wfdb->pieces = arena_alloc(&wfdb->base.arena, count + 1, sizeof *wfdb->pieces);
    return wfdb->pieces ? ERR_OK : err_memory(err, "the channels");
}

static int add_segments(struct wfdb *wfdb, const struct wfdb_header **layout, struct err *err)
{
    int64_t frame = 0;
    int failed = ERR_OK;
    for (size_t i = 0; i < wfdb->header.segment_count && !failed; i++) {
        const struct wfdb_segment *entry = &wfdb->header.segments[i];
        if (strcmp(entry->name, "~") == 0) {
            frame += entry->frames;
            continue;
        }
        struct wfdb_header *header = arena_alloc(&wfdb->base.arena, 1, sizeof *header);
        struct segment segment = {header, NULL, frame, entry->frames};
        failed = header ? segment_header(wfdb, entry->name, header, &segment.path, err)
                        : err_memory(err, "a segment");
        if (failed == ERR_IO) {
            wfdb->missing_files++;
            failed = ERR_OK;
            frame += entry->frames;
            continue;
        }
        if (!failed && !wfdb->pieces) {
            *layout = header;
            failed = make_pieces(wfdb, header->signal_count, err);
        }
        /* A first segment without length is the layout of a variable record: it has no samples. */
        if (!failed && !(i == 0 && entry->frames == 0))
            failed = add_segment(wfdb, wfdb->header.segments[0].frames == 0 ? *layout : NULL,
                                 &segment, err);
        frame += entry->frames;
    }
    if (!failed && !wfdb->pieces)
        failed = err_set(err, ERR_IO, "%s: none of its segments is there", wfdb->path);
    return failed;
}

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

/* Stretches between the runs of the first channel during which no other channel has a sample. */
static bool all_silent(const struct wfdb *wfdb, int64_t from_ns, int64_t to_ns)
{
    for (size_t i = 0; i < wfdb->channel_count; i++) {
        const struct pieces *pieces = &wfdb->pieces[i];
        size_t at = run_find(pieces->runs, pieces->run_count, from_ns);
        if (at < pieces->run_count && pieces->runs[at].start_ns < to_ns)
            return false;
    }
    return true;
}

static int make_gaps(struct wfdb *wfdb, struct err *err)
{
    size_t most = 1;
    for (size_t i = 0; i < wfdb->channel_count; i++)
        most = wfdb->pieces[i].run_count > most ? wfdb->pieces[i].run_count : most;
    struct gap *gaps = arena_alloc(&wfdb->base.arena, most, sizeof *gaps);
    if (!gaps)
        return err_memory(err, "the gaps");
    const struct pieces *pieces = wfdb->pieces;
    for (size_t i = 1; wfdb->channel_count > 0 && i < pieces->run_count; i++) {
        int64_t from = run_end_ns(&pieces->runs[i - 1]), to = pieces->runs[i].start_ns;
        if (to > from && all_silent(wfdb, from, to))
            gaps[wfdb->base.info.gap_count++] = (struct gap){from, to - from};
    }
    wfdb->base.info.gaps = gaps;
    return ERR_OK;
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
    int64_t end = frames_to_ns(wfdb, (double)wfdb->header.frames);
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
    const struct wfdb_header *layout = &wfdb->header;
    int failed = read_header(wfdb, wfdb->path, &wfdb->header, err);
    if (!failed && wfdb->header.segment_count > 0) {
        failed = add_segments(wfdb, &layout, err);
    } else if (!failed) {
        struct segment whole = {layout, wfdb->path, 0, layout->frames};
        failed = make_pieces(wfdb, layout->signal_count, err);
        if (!failed)
            failed = add_segment(wfdb, NULL, &whole, err);
    }
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
