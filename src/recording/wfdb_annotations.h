/*
 * wfdb_annotations.h - annotation files of WFDB records, in the MIT format. For the wfdb reader.
 *
 * Source: WFDB Applications Guide, annot(5), and the code table of the same guide.
 */
#ifndef RECORDING_WFDB_ANNOTATIONS_H
#define RECORDING_WFDB_ANNOTATIONS_H

#include <stddef.h>
#include <stdint.h>

#include "base/arena.h"
#include "base/err.h"
#include "recording/recording.h"

/* Decodes a whole file. Ticks are at rate_hz unless the file states its own resolution; times
 * are counted from sample 0. `out` (malloc) is the caller's, texts live in the arena. A file that
 * is no annotation file is ERR_FORMAT, naming the byte. */
MUST_CHECK int wfdb_annotations_read(const uint8_t *bytes, size_t size, const char *path,
                                     double rate_hz, struct arena *arena, struct annotation **out,
                                     size_t *count, struct err *err);

#endif
