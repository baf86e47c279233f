/*
 * fuzz_stream.c - any bytes as a live stream, in pieces that the bytes choose, with broken
 * connections in between.
 */
#include <stdlib.h>

#include "recording/stream_parser.h"

struct check {
    size_t values;
    double sum; /* reads every sample, so that one out of bounds is seen */
};

static int on_header(void *context, const struct stream_header *header, struct err *err)
{
    struct check *check = context;
    (void)err;
    if (header->channel_count == 0 || header->block_ns <= 0 || header->blocks <= 0)
        abort();
    check->values = 0;
    for (size_t i = 0; i < header->channel_count; i++) {
        if (header->channels[i].samples < 1 || !*header->channels[i].label)
            abort();
        check->values += (size_t)header->channels[i].samples;
    }
    return ERR_OK;
}

static int on_block(void *context, int64_t own_ns, const float *samples, struct err *err)
{
    struct check *check = context;
    (void)own_ns;
    (void)err;
    if (check->values == 0)
        abort();
    for (size_t i = 0; i < check->values; i++)
        check->sum += (double)samples[i];
    return ERR_OK;
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    struct check check = {0};
    const struct stream_sink sink = {on_header, on_block, &check};
    struct stream_parser *parser = NULL;
    if (size < 2 || stream_parser_new(data[0] & 1 ? 100 : 0, &sink, &parser, NULL))
        return 0;
    uint32_t state = data[1];
    for (size_t at = 2; at < size;) {
        state = state * 1664525u + 1013904223u;
        size_t part = 1 + (state >> 16) % 400;
        part = part < size - at ? part : size - at;
        if (stream_parser_feed(parser, data + at, part, NULL))
            break;
        at += part;
        if ((state >> 8) % 64 == 0)
            stream_parser_break(parser);
    }
    stream_parser_free(parser);
    return 0;
}
