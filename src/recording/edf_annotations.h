/*
 * edf_annotations.h - time-stamped annotation lists (TALs) of EDF+ and BDF+, read from the bytes of
 * an annotation signal. For the edf reader alone.
 *
 * Source: EDF+, Kemp & Olivan 2003, section 2.2.
 *   TAL = onset [ 0x15 duration ] 0x14 *( text 0x14 ) 0x00
 */
#ifndef RECORDING_EDF_ANNOTATIONS_H
#define RECORDING_EDF_ANNOTATIONS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

struct tal_text {
    int64_t onset_ns, span_ns; /* from the header's start */
    const uint8_t *text;       /* not terminated; empty in the list that keeps the record's time */
    size_t length;
};

struct tal_reader {
    const uint8_t *bytes;
    size_t size, at;
    int64_t onset_ns, span_ns; /* of the list that is being read */
    bool inside;               /* past an onset: texts follow */
    size_t malformed;          /* lists that broke the grammar and were skipped */
};

void tal_begin(struct tal_reader *reader, const uint8_t *bytes, size_t size);

/* The next text, the empty ones too; false at the end. */
bool tal_next(struct tal_reader *reader, struct tal_text *out);

/* Onset of the first list when it is the time-keeping one (its first text is empty, or it stands
 * at byte 0 all the same); false when there is none. */
bool tal_record_onset(const uint8_t *bytes, size_t size, int64_t *onset_ns);

#endif
