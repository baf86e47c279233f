/*
 * wfdb_segments.c - the signal files of a record, segment by segment, and which stretch of which
 * file each channel is made of. Decodes samples only where a format leaves no other way (8).
 */
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "base/str.h"
#include "recording/wfdb_format.h"
#include "recording/wfdb_impl.h"

int64_t wfdb_frames_ns(const struct wfdb *wfdb, double frames)
{
    double ns = frames * 1e9 / wfdb->header.rate_hz;
    return ns < 9e18 ? (int64_t)llround(ns) : INT64_MAX / 2;
}

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

/* Each segment has at most as many (wfdb_header.c), so that the sum never overflows. */
static const int64_t frames_most = 1000000000000000;

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
    int64_t start = wfdb_frames_ns(wfdb, (double)start_frame);
    int64_t end = wfdb_frames_ns(wfdb, (double)start_frame + (double)piece.count / per_frame);
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
        if (frame > frames_most)
            return err_set(err, ERR_FORMAT,
                           "%s: its segments make more than 1e15 samples; the "
                           "header is damaged",
                           wfdb->path);
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

int wfdb_segments_read(struct wfdb *wfdb, const struct wfdb_header **layout, struct err *err)
{
    *layout = &wfdb->header;
    int failed = read_header(wfdb, wfdb->path, &wfdb->header, err);
    if (failed)
        return failed;
    if (wfdb->header.segment_count > 0)
        return add_segments(wfdb, layout, err);
    struct segment whole = {&wfdb->header, wfdb->path, 0, wfdb->header.frames};
    failed = make_pieces(wfdb, wfdb->header.signal_count, err);
    return failed ? failed : add_segment(wfdb, NULL, &whole, err);
}
