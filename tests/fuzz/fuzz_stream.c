/*
 * fuzz_stream.c - streams from hostile bytes, in pieces and with breaks that the bytes choose:
 * every block follows a header, channels are as many and as named as it says, and pieces change
 * nothing.
 */
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include "recording/stream_parser.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

enum { PREFIX = 4 };

struct seen {
    bool any_header;
    size_t values; /* in a block */
    uint64_t digest;
};

static void take(struct seen *seen, const void *bytes, size_t count)
{
    const uint8_t *at = bytes;
    for (size_t i = 0; i < count; i++)
        seen->digest = (seen->digest ^ at[i]) * 1099511628211u;
}

static int take_header(void *context, const struct stream_header *header, struct err *err)
{
    struct seen *seen = context;
    (void)err;
    if (header->channel_count == 0 || header->block_ns <= 0 || header->blocks <= 0)
        abort();
    seen->any_header = true;
    seen->values = 0;
    take(seen, &header->block_ns, sizeof header->block_ns);
    for (size_t i = 0; i < header->channel_count; i++) {
        const struct stream_channel *channel = &header->channels[i];
        if (channel->samples <= 0)
            abort();
        seen->values += (size_t)channel->samples;
        take(seen, channel->label, strlen(channel->label) + 1);
        take(seen, channel->unit, strlen(channel->unit) + 1);
        take(seen, channel->transducer, strlen(channel->transducer) + 1);
        take(seen, channel->prefilter, strlen(channel->prefilter) + 1);
        for (size_t k = 0; i < 32 && k < i; k++) {
            if (strcmp(header->channels[k].label, channel->label) == 0)
                abort();
        }
    }
    return ERR_OK;
}

static int take_block(void *context, int64_t own_ns, const float *samples, struct err *err)
{
    struct seen *seen = context;
    (void)err;
    if (!seen->any_header)
        abort();
    take(seen, &own_ns, sizeof own_ns);
    take(seen, samples, seen->values * sizeof *samples); /* all of them are there */
    return ERR_OK;
}

/* Breaks after every 16 * break_at bytes (0: never); `piece` 0: as few pieces as there can be. */
static uint64_t play(double rate_hz, uint8_t break_at, size_t piece, const uint8_t *data,
                     size_t size, int64_t *garbled)
{
    struct seen seen = {.digest = 14695981039346656037u};
    struct stream_sink sink = {take_header, take_block, &seen};
    struct stream_parser *parser = NULL;
    size_t stretch = break_at ? 16 * (size_t)break_at : size + 1;
    if (stream_parser_new(rate_hz, &sink, &parser, NULL))
        abort();
    for (size_t at = 0; at < size;) {
        size_t part = stretch - at % stretch < size - at ? stretch - at % stretch : size - at;
        part = piece && piece < part ? piece : part;
        if (stream_parser_feed(parser, data + at, part, NULL))
            abort();
        at += part;
        if (at % stretch == 0)
            stream_parser_break(parser);
        if (piece)
            piece = piece * 7 % 251 + 1;
    }
    *garbled = stream_parser_garbled(parser);
    if (*garbled < 0 || (*garbled > 0) != (*stream_parser_complaint(parser) != '\0'))
        abort();
    stream_parser_free(parser);
    return seen.digest;
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    static const double rates[] = {0, 0, 1, 333.333, 1000, 0.2};
    int64_t garbled, garbled_pieces;
    if (size < PREFIX)
        return 0;
    double rate_hz = rates[data[0] % 6];
    uint8_t break_at = data[1] < 128 ? 0 : data[1];
    uint64_t whole = play(rate_hz, break_at, 0, data + PREFIX, size - PREFIX, &garbled);
    uint64_t pieces =
        play(rate_hz, break_at, 1 + (size_t)data[2], data + PREFIX, size - PREFIX, &garbled_pieces);
    if (whole != pieces || garbled != garbled_pieces)
        abort();
    return 0;
}
