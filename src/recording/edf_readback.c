/*
 * edf_readback.c - decoding written records by pread. Knows the layout from the writer and reads no
 * header.
 */
#include "recording/edf_readback.h"

#include <errno.h>
#include <fcntl.h>
#include <math.h>
#include <stdatomic.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "base/array.h"
#include "recording/edf_writer_impl.h"

enum { PIECE_BYTES = 6144 }; /* whole samples of 2 and of 3 bytes */

struct readback_channel {
    struct writer_channel channel;
    size_t at; /* byte of its first sample in a record */
};

struct edf_readback {
    int fd;
    char *path;
    int width;
    size_t header_bytes, record_bytes;
    struct readback_channel *channels;
    size_t channel_count;
    _Atomic int64_t records;
};

static int copy_layout(struct edf_readback *readback, const struct edf_writer *writer,
                       struct err *err)
{
    void *memory = NULL;
    int failed = array_new(&memory, writer->channel_count, sizeof *readback->channels, err);
    if (failed)
        return failed;
    readback->channels = memory;
    readback->channel_count = writer->channel_count;
    readback->width = writer->width;
    readback->header_bytes = edf_writer_header_bytes(writer->channel_count);
    readback->record_bytes = writer->record_bytes;
    size_t at = 0;
    for (size_t i = 0; i < writer->channel_count; i++) {
        readback->channels[i] = (struct readback_channel){writer->channels[i], at};
        at += (size_t)writer->channels[i].samples * (size_t)writer->width;
    }
    return ERR_OK;
}

int edf_readback_open(const struct edf_writer *writer, struct edf_readback **out, struct err *err)
{
    struct edf_readback *made = calloc(1, sizeof *made);
    if (!made)
        return err_memory(err, writer->path);
    made->fd = -1;
    made->path = strdup(writer->path);
    int failed = made->path ? copy_layout(made, writer, err) : err_memory(err, writer->path);
    if (!failed) {
        made->fd = open(made->path, O_RDONLY | O_CLOEXEC);
        if (made->fd < 0)
            failed = err_errno(err, made->path, "open it to read back");
    }
    atomic_init(&made->records, writer->records);
    if (failed)
        edf_readback_free(made);
    else
        *out = made;
    return failed;
}

void edf_readback_free(struct edf_readback *readback)
{
    if (!readback)
        return;
    if (readback->fd >= 0)
        (void)close(readback->fd); /* nothing was written through it */
    free(readback->channels);
    free(readback->path);
    free(readback);
}

void edf_readback_advance(struct edf_readback *readback, int64_t records)
{
    atomic_store_explicit(&readback->records, records, memory_order_release);
}

int64_t edf_readback_samples(const struct edf_readback *readback, size_t channel)
{
    return atomic_load_explicit(&readback->records, memory_order_acquire) *
           readback->channels[channel].channel.samples;
}

static int read_all(const struct edf_readback *readback, uint8_t *to, size_t size, off_t at,
                    struct err *err)
{
    for (size_t done = 0; done < size;) {
        ssize_t got = pread(readback->fd, to + done, size - done, at + (off_t)done);
        if (got < 0 && errno == EINTR)
            continue;
        if (got < 0)
            return err_errno(err, readback->path, "read back");
        if (got == 0)
            return err_set(err, ERR_IO, "%s: ends at byte %lld; something else cut it off",
                           readback->path, (long long)at + (long long)done);
        done += (size_t)got;
    }
    return ERR_OK;
}

static void decode(const struct writer_channel *channel, int width, const uint8_t *from,
                   int64_t count, float *out)
{
    int shift = 32 - 8 * width;
    for (int64_t i = 0; i < count; i++, from += width) {
        uint32_t bits = (uint32_t)from[0] | (uint32_t)from[1] << 8;
        if (width == 3)
            bits |= (uint32_t)from[2] << 16;
        int32_t value = (int32_t)(bits << shift) >> shift;
        out[i] = channel->lowest_is_missing && value == channel->low
                     ? NAN
                     : (float)(channel->gain * value + channel->offset);
    }
}

int edf_readback_read(const struct edf_readback *readback, size_t channel, int64_t first,
                      int64_t count, float *out, struct err *err)
{
    const struct readback_channel *at = &readback->channels[channel];
    const int64_t samples = at->channel.samples, width = readback->width;
    int64_t written = edf_readback_samples(readback, channel);
    uint8_t bytes[PIECE_BYTES];
    if (first < 0 || count < 0 || first > written || count > written - first)
        return err_set(err, ERR_USAGE, "%s: samples %lld..%lld are not written yet; there are %lld",
                       readback->path, (long long)first, (long long)(first + count),
                       (long long)written);
    while (count > 0) {
        int64_t within = first % samples, length = samples - within;
        length = length < count ? length : count;
        length = length < PIECE_BYTES / width ? length : PIECE_BYTES / width;
        off_t byte = (off_t)(readback->header_bytes + at->at) +
                     first / samples * (off_t)readback->record_bytes + within * width;
        int failed = read_all(readback, bytes, (size_t)(length * width), byte, err);
        if (failed)
            return failed;
        decode(&at->channel, readback->width, bytes, length, out);
        first += length;
        count -= length;
        out += length;
    }
    return ERR_OK;
}
