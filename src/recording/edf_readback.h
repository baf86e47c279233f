/*
 * edf_readback.h - samples of a file that is still being written, read back while it grows.
 *
 * Reads whole written records only, never the one in progress. Outlives the writer: the samples
 * stay readable after it has closed the file.
 *
 * Threads: one thread writes records and then says so (edf_readback_advance); any others read.
 */
#ifndef RECORDING_EDF_READBACK_H
#define RECORDING_EDF_READBACK_H

#include <stddef.h>
#include <stdint.h>

#include "base/err.h"
#include "recording/edf_writer.h"

struct edf_readback;

/* Opens the file of `writer` once more, for reading. */
MUST_CHECK int edf_readback_open(const struct edf_writer *writer, struct edf_readback **out,
                                 struct err *err);
void edf_readback_free(struct edf_readback *readback);

/* The writer has written `records` so far. */
void edf_readback_advance(struct edf_readback *readback, int64_t records);

/* Samples of a channel that can be read now. */
int64_t edf_readback_samples(const struct edf_readback *readback, size_t channel);

/* Samples [first, first + count) of a channel into out, shape (count), NaN where missing. Refuses
 * what is not written yet. */
MUST_CHECK int edf_readback_read(const struct edf_readback *readback, size_t channel, int64_t first,
                                 int64_t count, float *out, struct err *err);

#endif
