/*
 * edf_writer.h - writes EDF+ and BDF+ record by record, valid on disk after every record.
 *
 * While open the header says -1 records, as EDF+ allows; edf_writer_close() patches the count. A
 * crash in between leaves a file that any reader which computes the count from the size can use.
 * Sources: EDF (Kemp et al. 1992), EDF+ (Kemp & Olivan 2003), BDF (24-bit variant, header as EDF).
 *
 * Values outside the physical range are clipped and counted. NaN is written as the digital
 * minimum and counted too, unless the spec gives that value up for it: then a value that is there
 * is never written as it, and the transducer field of each signal says so in words that the EDF
 * reader knows (EDF itself has no missing sample).
 */
#ifndef RECORDING_EDF_WRITER_H
#define RECORDING_EDF_WRITER_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "base/err.h"

/* Ends the transducer field of a signal whose digital minimum means "no sample". */
#define EDF_MISSING_WORDS "lowest value = missing"

/* The value that a number has once it is written into a header: 8 characters, no exponent. */
double edf_number(double value);

struct edf_writer;

struct edf_channel_spec {
    const char *label;      /* printable ASCII, 16 at most */
    const char *unit;       /* 8 at most */
    const char *transducer; /* 80 at most; "" allowed */
    const char *prefilter;  /* 80 at most; "" allowed */
    double physical_min, physical_max;
    int digital_min, digital_max; /* both 0: the whole range of the format */
    int samples_per_record;
};

struct edf_spec {
    bool bdf;               /* 24-bit BDF+ instead of 16-bit EDF+ */
    bool discontinuous;     /* +D: records may leave gaps */
    bool lowest_is_missing; /* NaN is the digital minimum; a device's words give way to saying so */
    const char *subject;    /* EDF+ patient field; NULL = "X X X X" */
    const char *recording;  /* after "Startdate dd-MMM-yyyy "; NULL = "X X X" */
    int64_t start_civil_ns; /* fractions of a second go to the first record's onset */
    int64_t record_ns;      /* duration of a record */
    size_t annotation_bytes; /* room for annotations a record; 0 = 120 */
    const struct edf_channel_spec *channels;
    size_t channel_count;
};

/* Creates `path` (mode 0600; an existing file is refused). */
MUST_CHECK int edf_writer_open(const char *path, const struct edf_spec *spec,
                               struct edf_writer **out, struct err *err);

/* Appends one record starting onset_ns after the start (ignored, and counted on from the last, in
 * a continuous file). `samples` holds channel after channel, samples_per_record values each. On
 * failure (a full disk) nothing is taken: the same record can be appended again later. */
MUST_CHECK int edf_writer_record(struct edf_writer *writer, int64_t onset_ns, const float *samples,
                                 struct err *err);

/* Queues an annotation; it goes into the next record that has room, with its true onset. span_ns
 * 0 = a point. Text is UTF-8. */
MUST_CHECK int edf_writer_annotate(struct edf_writer *writer, int64_t onset_ns, int64_t span_ns,
                                   const char *text, struct err *err);

/* fdatasync: what was appended survives a power cut. */
MUST_CHECK int edf_writer_sync(struct edf_writer *writer, struct err *err);

int64_t edf_writer_records(const struct edf_writer *writer);
int64_t edf_writer_clipped(const struct edf_writer *writer); /* samples out of range or NaN */

/* Writes the record count (and +C for +D when no gap was left after all: many readers refuse +D)
 * and syncs: the file is complete. May be tried again after a failure. */
MUST_CHECK int edf_writer_finish(struct edf_writer *writer, struct err *err);
/* edf_writer_finish(), then closes and frees, even when that failed. Annotations that found no room
 * are an error (the rest of the file is good, with a count of -1). */
MUST_CHECK int edf_writer_close(struct edf_writer *writer, struct err *err);
/* Closes without patching the count, as a crash would. */
void edf_writer_abandon(struct edf_writer *writer);

#endif
