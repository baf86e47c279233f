/*
 * wfdb_impl.h - an open WFDB record. For wfdb.c and wfdb_segments.c alone.
 */
#ifndef RECORDING_WFDB_IMPL_H
#define RECORDING_WFDB_IMPL_H

#include "recording/reader.h"
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

/* Reads the headers of the record and its segments, opens the signal files, and makes the pieces of
 * each channel. *layout is the header that names the channels. */
MUST_CHECK int wfdb_segments_read(struct wfdb *wfdb, const struct wfdb_header **layout,
                                  struct err *err);

/* Recording time of a number of frames. */
int64_t wfdb_frames_ns(const struct wfdb *wfdb, double frames);

#endif
