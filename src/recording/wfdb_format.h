/*
 * wfdb_format.h - the sample encodings of WFDB signal files. For the wfdb reader alone.
 *
 * Source: WFDB Applications Guide, signal(5). A sample's place is arithmetic in all of them but
 * format 8 (differences), which is decoded as a whole.
 */
#ifndef RECORDING_WFDB_FORMAT_H
#define RECORDING_WFDB_FORMAT_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/* Formats 8, 16, 24, 32, 61, 80, 160, 212, 310, 311. */
bool wfdb_format_known(int format);

/* Whole samples in `size` bytes. */
int64_t wfdb_format_samples(int format, size_t size);

/* Sample number `index` of the bytes (all signals of the file counted, as they lie), in ADC units;
 * of format 8, the difference. The caller has checked that index < wfdb_format_samples(). */
int32_t wfdb_format_get(int format, const uint8_t *bytes, int64_t index);

/* The value that says "no sample"; false when the format has none. */
bool wfdb_format_missing(int format, int32_t *value);

#endif
