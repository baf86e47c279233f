/*
 * stream_parser.h - from streamed bytes to samples: lines of numbers, or an EDF+/BDF+ byte stream,
 * told apart by the first bytes.
 *
 * Lines: a header `t,ECG II [mV],EDA [uS]`, then rows; comma, semicolon or tab; decimal comma where
 * the delimiter is not one; `t` (seconds on the stream's own clock) may be missing when a rate is
 * given. Without one the rate is estimated from the first rows' times and rounded to a rate that
 * devices have. A later line that is a header again (not numbers) changes the channels. A header is
 * told once the line after it is a row that fits; a line that nothing fits was noise. Without
 * header, but with a rate, two rows that are as wide make one. A row that cannot be read is counted
 * and skipped; an empty cell or NaN is a missing sample. Rows that still wait for their rate when
 * the stream ends, 63 at most, are not told.
 * Records: header, then whole records, of EDF, EDF+, BDF, BDF+; a second header where a record
 * should begin, or where bytes were lost, changes the channels. Annotation signals are read for
 * time-keeping only.
 *
 * Bytes come in pieces of any size; nothing is kept of them but one line (64 KiB at most: a longer
 * one is garbled) or one record. Never fails on what comes: what cannot be read is counted.
 * Allocates on a header, never on a row or record.
 */
#ifndef RECORDING_STREAM_PARSER_H
#define RECORDING_STREAM_PARSER_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "base/err.h"
#include "recording/role.h"

struct stream_channel {
    const char *label, *unit; /* UTF-8; label unique in its header */
    enum role role;
    const char *transducer, *prefilter; /* "" for lines */
    double physical_min, physical_max;  /* declared range; both 0 for lines, which have none */
    int digital_min, digital_max;       /* both 0 for lines */
    int samples;                        /* in a block */
};

/* Samples come in blocks: for lines a block is one row, for records one record. */
struct stream_header {
    const struct stream_channel *channels; /* shape (channel_count); valid during the call */
    size_t channel_count;
    int64_t block_ns; /* duration of `blocks` blocks together, exactly: a row at 333.333 Hz is */
    int64_t blocks;   /* 3 s for 1000 blocks */
};

struct stream_sink {
    /* A first or another header. */
    int (*header)(void *context, const struct stream_header *header, struct err *err);
    /* One block: channel after channel, `samples` values each; NaN = missing. own_ns is the
     * stream's own time of its first sample (column t, or the record's time-keeping onset);
     * NS_NONE when it has none. */
    int (*block)(void *context, int64_t own_ns, const float *samples, struct err *err);
    void *context;
};

struct stream_parser;

/* `rate_hz` of lines without a time column, from 0.0001 to 1000000; 0 = they have one. The sink is
 * copied. */
MUST_CHECK int stream_parser_new(double rate_hz, const struct stream_sink *sink,
                                 struct stream_parser **out, struct err *err);
void stream_parser_free(struct stream_parser *parser);

/* Fails only when memory runs out or the sink fails. */
MUST_CHECK int stream_parser_feed(struct stream_parser *parser, const void *bytes, size_t count,
                                  struct err *err);
/* The connection was lost: what comes next begins anew (perhaps with a header, perhaps without one
 * in the middle of a line). Half a line or record is dropped and counted. */
void stream_parser_break(struct stream_parser *parser);

/* Lines that could not be read, or bytes skipped in a record stream; and why the last one. */
int64_t stream_parser_garbled(const struct stream_parser *parser);
const char *stream_parser_complaint(const struct stream_parser *parser); /* "" when none */

#endif
