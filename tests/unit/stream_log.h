/*
 * stream_log.h - what a stream parser calls, written down; and one input played whole, a byte at a
 * time and in random pieces, which must all give the same calls.
 */
#ifndef TESTS_STREAM_LOG_H
#define TESTS_STREAM_LOG_H

#include "base/str.h"
#include "recording/stream_parser.h"

enum { LOG_CHANNELS_MOST = 16, INPUT_BREAKS_MOST = 8, LABEL_SIZE = 40 };

/* Bytes, and before which of them the connection breaks. */
struct input {
    double rate_hz;
    struct str bytes;
    size_t breaks[INPUT_BREAKS_MOST];
    size_t break_count;
};

void input_put(struct input *input, const char *format, ...) PRINTF_LIKE(2, 3);
void input_put_n(struct input *input, const void *bytes, size_t count);
void input_break(struct input *input);

struct stream_log {
    struct str calls; /* one line a call, values to the last bit */
    size_t headers;
    /* the last header */
    size_t channel_count, block_values;
    char labels[LOG_CHANNELS_MOST][LABEL_SIZE], units[LOG_CHANNELS_MOST][LABEL_SIZE];
    struct stream_channel channels[LOG_CHANNELS_MOST]; /* texts left out */
    int64_t block_ns, blocks;
    /* every block */
    size_t block_count, block_room;
    int64_t *own_ns;
    float *values; /* one after the other */
    size_t value_count, value_room;
    int64_t garbled;
    char complaint[200];
};

/* Plays the input in every way, and gives the log they agree on; frees the input. */
struct stream_log input_play(struct input *input);
void stream_log_free(struct stream_log *log);

#endif
