/*
 * source.h - where live bytes come from: a FIFO, a serial line, a TCP stream, standard input, or
 * a file that grows.
 *
 * The program connects out and never listens. Opening does not block: a connection in progress is
 * told apart from one that stands. Reading never blocks. What the bytes mean is stream_parser.h's.
 */
#ifndef RECORDING_SOURCE_H
#define RECORDING_SOURCE_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "base/err.h"

struct source;

/* "fifo:PATH", "serial:DEVICE@BAUD", "tcp:HOST:PORT" ("tcp:[::1]:4000"), "-", else a file's path.
 * Refuses what cannot be meant (no port, unknown baud rate); opens nothing. */
MUST_CHECK int source_new(const char *text, struct source **out, struct err *err);
void source_free(struct source *source);

/* Once it is over, can it come back? false for standard input alone. */
bool source_returns(const struct source *source);

/* Opens, or goes on opening: returns 0 with *open = false while a connection is under way. An
 * error is one line; the caller tries again later, from the start. */
MUST_CHECK int source_open(struct source *source, bool *open, struct err *err);
void source_close(struct source *source);

enum source_answer {
    SOURCE_BYTES,   /* *count > 0 bytes were read */
    SOURCE_NOTHING, /* none are there now */
    SOURCE_OVER,    /* the other side closed; close it, and open it again when it returns */
};

/* Reads what is there, up to `room` bytes. A growing file is never over; one that was truncated or
 * replaced is (it is opened again from its start). ERR_IO when the line broke. */
MUST_CHECK int source_read(struct source *source, void *buffer, size_t room, size_t *count,
                           enum source_answer *answer, struct err *err);

/* Waits until bytes, a connection's end, or `wake_fd` (-1: none) may be there; a growing file,
 * which cannot be waited for, is looked at again after some milliseconds. */
MUST_CHECK int source_wait(struct source *source, int wake_fd, int timeout_ms, struct err *err);

#endif
