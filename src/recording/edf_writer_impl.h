/*
 * edf_writer_impl.h - a file while it is written. For edf_writer*.c and edf_readback.c alone.
 */
#ifndef RECORDING_EDF_WRITER_IMPL_H
#define RECORDING_EDF_WRITER_IMPL_H

#include "base/ns.h"
#include "base/str.h"
#include "recording/edf_writer.h"

/* Bytes of the header: the C or D of "EDF+C", and the record count. */
enum { EDF_KIND_AT = 196, EDF_COUNT_AT = 236 };

struct writer_channel {
    int samples;   /* in a record */
    int low, high; /* digital limits */
    bool lowest_is_missing;
    double gain, offset; /* digital = (physical - offset) / gain, from the header's own text */
};

struct queued {
    char *text; /* a whole list, without the final zero */
    size_t length;
};

struct edf_writer {
    int fd;
    char *path;
    bool bdf, discontinuous;
    bool gapped; /* a record did not start where the last one ended */
    int width;
    struct writer_channel *channels;
    size_t channel_count;
    size_t annotation_bytes, record_bytes;
    uint8_t *record;
    int64_t start_fraction_ns, record_ns, next_onset_ns;
    int64_t records, clipped;
    struct queued *queue;
    size_t queue_first, queue_count, queue_room;
};

/* Of a file with so many channels and one annotation signal. */
static inline size_t edf_writer_header_bytes(size_t channel_count)
{
    return 256 * (channel_count + 2);
}

/* Limits and scale as the header's texts will say them; refuses a channel without a range. */
MUST_CHECK int edf_writer_plan_channel(const struct edf_spec *spec,
                                       const struct edf_channel_spec *channel,
                                       struct writer_channel *out, struct err *err);

/* The whole header, record count -1. */
MUST_CHECK int edf_writer_put_header(const struct edf_spec *spec, size_t annotation_samples,
                                     struct str *header, struct err *err);

#endif
