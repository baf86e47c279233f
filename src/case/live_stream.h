/*
 * live_stream.h - one source while it streams: bytes in, BDF+ files beside the case, traces that
 * grow, and the fit of the stream's clock against the laptop's.
 *
 * Threads of its own read the source and write the files, so that neither a slow disk nor a
 * stopped terminal loses samples; what one thread has not written yet waits in memory.
 *
 * What streams in is written as BDF+D, in parts: FOLDER/STEM-live-1.bdf, -2, ... (first free
 * number). A lost connection is a gap in the same part; another header, or a value outside the
 * part's range, begins the next part. A part is valid on disk after any crash.
 *
 * All functions are for the thread that started the stream.
 */
#ifndef CASE_LIVE_STREAM_H
#define CASE_LIVE_STREAM_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "base/err.h"
#include "timeline/clock_map.h"
#include "trace/trace.h"

struct live_stream;

/* Texts are copied. */
struct live_stream_config {
    const char *source; /* "fifo:PATH", "serial:DEVICE@BAUD", "tcp:HOST:PORT", "-", or a file */
    double rate_hz;     /* of lines without a time column; 0 = they have one */
    const char *folder, *stem;
    const char *subject;             /* study code, for the file's header */
    int64_t case_minus_boottime_ns;  /* case time of an instant on CLOCK_BOOTTIME */
    int64_t civil_minus_boottime_ns; /* theatre's wall clock of it, when the session began */
};

enum live_state {
    LIVE_CONNECTING, /* not open yet: trying, with a growing pause between attempts */
    LIVE_RECEIVING,
    LIVE_SILENT, /* open, and nothing has come for some seconds */
    LIVE_LOST,   /* was open: trying again */
    LIVE_ENDED,  /* stdin is at its end: nothing more will come */
};

struct live_status {
    enum live_state state;
    char text[160];     /* one line for people: why it is not receiving; "" when it is */
    char trouble[240];  /* the file cannot be written: why; "" when all is well. Samples wait. */
    int64_t samples;    /* received, of the first channel, over all parts */
    int64_t garbled;    /* lines, or bytes of a record stream, that could not be read */
    int64_t dropped;    /* samples lost because memory for waiting ones ran out */
    int64_t gaps;       /* connections lost, and jumps of the stream's own time */
    int64_t waiting_ns; /* how much is not on disk yet */
    int64_t last_boottime_ns; /* when something came last; NS_NONE = never */
    double drift_ppm;         /* of the present stretch; NaN while it is too short to tell */
    size_t part_count;
    int64_t named; /* how often a part got its file's name: when it grows, the store must be told */
};

/* What the store must keep of a part. Texts and pieces are valid until the next call of
 * live_stream_part() for the same stream. */
struct live_part {
    const char *path;
    bool closed;                      /* complete and synced: it can be attached */
    const struct clock_piece *pieces; /* recording time to case time, so far */
    size_t piece_count;
};

/* Refuses a source that cannot be meant; one that is not there yet is waited for. */
MUST_CHECK int live_stream_start(const struct live_stream_config *config, struct live_stream **out,
                                 struct err *err);
void live_stream_status(struct live_stream *stream, struct live_status *out);
MUST_CHECK int live_stream_part(struct live_stream *stream, size_t index, struct live_part *out,
                                struct err *err);

/* Brings the traces up to date with what has come, and gives them: one a channel of each part so
 * far, newest part last. Pointers and their sample counts stand until the next refresh; a trace
 * once given stays until live_stream_free(). */
MUST_CHECK int live_stream_refresh(struct live_stream *stream, struct trace *const **traces,
                                   size_t *count, struct err *err);

/* Ends reading, writes what waits and closes the part, waiting at most `wait_ms` for a disk that
 * does not take it. Traces stay readable. An error says what could not be written. */
MUST_CHECK int live_stream_stop(struct live_stream *stream, int wait_ms, struct err *err);
void live_stream_free(struct live_stream *stream);

#endif
