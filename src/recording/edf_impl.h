/*
 * edf_impl.h - an open EDF or BDF file. For edf.c and edf_records.c alone.
 */
#ifndef RECORDING_EDF_IMPL_H
#define RECORDING_EDF_IMPL_H

#include "recording/edf_header.h"
#include "recording/reader.h"

/* Records that follow one another without a gap. */
struct stretch {
    int64_t start_ns;
    int64_t first, count; /* records */
};

struct edf {
    struct recording base;
    const struct file_space *files;
    struct mapped mapped;
    struct edf_header header;
    size_t *signal_of; /* channel -> signal, shape (channel_count) */
    int64_t records;   /* whole ones */
    int64_t tail;      /* bytes of a last record that was cut off */
    int64_t origin_ns; /* onset of record 0: recording time 0 */
    struct stretch *stretches;
    size_t stretch_count, stretch_room;
    struct annotation *annotations;
    size_t annotation_count, annotation_room;
};

/* Counts the records that are there, lays them on time, and reads the annotations on the way. */
MUST_CHECK int edf_records_read(struct edf *edf, struct err *err);

#endif
