/*
 * stream_parser_impl.h - what the two kinds of streams share. For stream_parser.c, line_stream.c,
 * line_rate.c and record_stream.c alone.
 */
#ifndef RECORDING_STREAM_PARSER_IMPL_H
#define RECORDING_STREAM_PARSER_IMPL_H

#include "base/arena.h"
#include "base/ns.h"
#include "base/str.h"
#include "recording/edf_header.h"
#include "recording/stream_parser.h"

enum { SIGNATURE_SIZE = 8, COMPLAINT_SIZE = 160, STREAM_CHANNELS_MOST = 1024 };

struct complaints {
    int64_t count;
    char last[COMPLAINT_SIZE];
};
/* `by` more lines, or bytes, could not be read. */
void complain(struct complaints *complaints, int64_t by, const char *format, ...) PRINTF_LIKE(3, 4);

/* `label`, or "label #2" and so on where one of the channels so far has it. NULL when out of
 * memory. */
const char *stream_label(struct arena *arena, const struct stream_channel *channels, size_t count,
                         const char *label);

/* ---- line_stream.c ---- */

struct line_stream;
MUST_CHECK int line_stream_new(double rate_hz, const struct stream_sink *sink,
                               struct complaints *complaints, struct line_stream **out,
                               struct err *err);
void line_stream_free(struct line_stream *lines);
MUST_CHECK int line_stream_feed(struct line_stream *lines, const char *bytes, size_t count,
                                struct err *err);
/* Half a line is dropped; channels stay as they are. */
void line_stream_break(struct line_stream *lines);
/* Another kind of stream began: the header is none of what comes later. */
void line_stream_forget(struct line_stream *lines);
/* Has it a header? Then bytes that look like nothing are its rows. */
bool line_stream_has_header(const struct line_stream *lines);

/* ---- line_rate.c ---- */

struct line_rate {
    int64_t block_ns, blocks; /* as in struct stream_header */
};
/* Of rows that follow one another at times_ns, shape (count); false while it cannot be told: too
 * few, and times that differ or do not rise. `final`: no more will come. */
bool line_rate_of_times(const int64_t *times_ns, size_t count, bool final, struct line_rate *out);
struct line_rate line_rate_of_hz(double rate_hz);

/* ---- record_stream.c ---- */

struct record_stream;
MUST_CHECK int record_stream_new(const struct stream_sink *sink, struct complaints *complaints,
                                 struct record_stream **out, struct err *err);
void record_stream_free(struct record_stream *records);
MUST_CHECK int record_stream_feed(struct record_stream *records, const uint8_t *bytes, size_t count,
                                  struct err *err);
/* Half a record is dropped; what comes next begins with a header, or is skipped up to one. */
void record_stream_break(struct record_stream *records);
/* Could these first bytes, up to SIGNATURE_SIZE, be those of an EDF or BDF header? */
bool record_signature(const uint8_t *bytes, size_t count);

#endif
