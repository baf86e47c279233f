/*
 * line_stream_impl.h - a stream of lines, shared by its rows (line_stream.c) and its headers
 * (line_header.c).
 */
#ifndef RECORDING_LINE_STREAM_IMPL_H
#define RECORDING_LINE_STREAM_IMPL_H

#include <csv.h>

#include "recording/stream_parser_impl.h"

enum { LINE_MOST = 64 << 10, HELD_MOST = 64, NO_COLUMN = -1 };

/* A line that would begin a header, until the next line is a row of it. */
struct waiting_line {
    enum { WAITS_NOTHING, WAITS_HEADER, WAITS_ROW } what; /* WAITS_ROW: columns without names */
    char *text;                                           /* LINE_MOST bytes */
    size_t length;
    char delimiter;
    size_t width;
    int time_column;
};

struct line_stream {
    struct stream_sink sink;
    struct complaints *complaints;
    double rate_hz;

    char *line; /* LINE_MOST bytes */
    size_t length;
    bool too_long; /* the line is being skipped */
    struct waiting_line waiting;

    struct csv_parser csv;
    char *fields; /* texts of the line's fields, each terminated; room for LINE_MOST * 2 */
    size_t fields_used;
    const char **field; /* shape (field_count); room for FIELDS_MOST */
    size_t field_count;
    bool field_failed;

    struct arena arena; /* of the header */
    bool has_header;
    char delimiter;
    int time_column; /* NO_COLUMN: there is none */
    double time_scale;
    size_t width;
    struct stream_channel *channels;
    size_t channel_count;

    bool rate_known;
    struct line_rate rate;
    float *values;              /* of one row, shape (channel_count) */
    float *held;                /* rows before the rate is known, shape (HELD_MOST, channels) */
    int64_t held_ns[HELD_MOST]; /* and their times */
    size_t held_count;
};

/* ---- line_header.c; both look at the line as it is split now ---- */

/* Could it be a header? Words where rows have numbers, and it says where the time is, unless a
 * rate does. */
bool line_header_looks(const struct line_stream *lines, int *time_column);
/* Its columns become the stream's; `bare`: it is a row, and the columns have no names. */
MUST_CHECK int line_header_take(struct line_stream *lines, bool bare, int time_column,
                                struct err *err);

#endif
