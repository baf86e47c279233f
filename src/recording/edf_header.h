/*
 * edf_header.h - the header of EDF, EDF+, BDF and BDF+ checked once into a frozen struct. For the
 * edf reader alone.
 *
 * Sources: EDF, Kemp et al. 1992 (Electroenceph clin Neurophysiol 82:391); EDF+, Kemp & Olivan
 * 2003 (Clin Neurophysiol 114:1755); BDF, the 24-bit variant with the same header.
 */
#ifndef RECORDING_EDF_HEADER_H
#define RECORDING_EDF_HEADER_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "base/err.h"
#include "recording/reader.h"

enum { EDF_FIXED_BYTES = 256, EDF_SIGNAL_BYTES = 256, EDF_SIGNAL_MOST = 9999 };

struct edf_signal {
    const char *label, *transducer, *unit, *prefilter;
    double physical_min, physical_max; /* both 0: digital values are shown */
    double gain, offset;               /* physical = gain * digital + offset */
    int64_t samples;                   /* in a record */
    int64_t at;                        /* byte of its first sample in a record */
    bool annotations;
    bool has_missing; /* its digital minimum, `missing`, means that there is no sample */
    int32_t missing;
};

struct edf_header {
    bool bdf, plus, discontinuous;
    int width; /* bytes a sample: 2 or 3 */
    const char *format;
    const char *subject, *equipment;
    int64_t start_civil_ns; /* whole seconds; NS_NONE = not usable */
    int64_t bytes;          /* of the header, computed */
    int64_t declared_records;
    int64_t record_ns; /* 0 as the file says it */
    int64_t record_bytes;
    struct edf_signal *signals; /* shape (signal_count) */
    size_t signal_count;
};

/* Reads the header of a whole mapped file; texts and signals live in the recording's arena, notes
 * go to the recording. */
MUST_CHECK int edf_header_read(struct recording *recording, const uint8_t *data, size_t size,
                               struct edf_header *out, struct err *err);

#endif
