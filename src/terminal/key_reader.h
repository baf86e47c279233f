/*
 * key_reader.h - takes bytes from the terminal the moment they arrive, stamps them, and passes them
 * on through a pipe, whatever the program is busy with.
 *
 * Knows bytes and clocks, no keys: what the bytes mean is for whoever reads the pipe. A thread of
 * its own reads; the other functions are for one thread.
 */
#ifndef TERMINAL_KEY_READER_H
#define TERMINAL_KEY_READER_H

#include <stdbool.h>
#include <stdint.h>
#include <stdio.h>

#include "base/err.h"

struct key_reader;

struct key_stamp {
    int64_t boottime_ns; /* CLOCK_BOOTTIME when the byte arrived */
    int64_t utc_ns;      /* the wall clock at the same moment */
};

struct key_stamp key_stamp_now(void);

/* Opens the terminal of standard input again, or /dev/tty, and begins to read from it. Fails with
 * ERR_USAGE when there is no such terminal. */
MUST_CHECK int key_reader_start(bool from_tty, struct key_reader **out, struct err *err);
/* Ends the thread and closes the pipe; bytes in it are lost. NULL is allowed. */
void key_reader_stop(struct key_reader *reader);

/* The end of the pipe to read from, byte by byte. Hung up once the terminal is gone. Owned by the
 * reader. */
FILE *key_reader_stream(const struct key_reader *reader);

/* How many bytes were read out of the pipe so far. */
uint64_t key_reader_taken(struct key_reader *reader);
/* When byte number `byte` (from 0) arrived; never one before a byte that was asked for earlier.
 * Now, when it has not. */
struct key_stamp key_reader_stamp(struct key_reader *reader, uint64_t byte);

#endif
