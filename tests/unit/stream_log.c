/*
 * stream_log.c - playing an input to a stream parser in different pieces.
 */
#include "stream_log.h"

#include <criterion/criterion.h>

#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"

enum { RANDOM_PLAYS = 12 };

void input_put(struct input *input, const char *format, ...)
{
    char text[512];
    va_list args;
    va_start(args, format);
    int length = vsnprintf(text, sizeof text, format, args);
    va_end(args);
    cr_assert(length >= 0 && (size_t)length < sizeof text);
    input_put_n(input, text, (size_t)length);
}

void input_put_n(struct input *input, const void *bytes, size_t count)
{
    str_put_n(&input->bytes, bytes, count);
    cr_assert(!str_failed(&input->bytes));
}

void input_break(struct input *input)
{
    cr_assert_lt(input->break_count, INPUT_BREAKS_MOST);
    input->breaks[input->break_count++] = input->bytes.length;
}

/* ---- the sink ---- */

static int take_header(void *context, const struct stream_header *header, struct err *err)
{
    struct stream_log *log = context;
    (void)err;
    log->headers++;
    log->channel_count = header->channel_count;
    log->block_values = 0;
    log->block_ns = header->block_ns;
    log->blocks = header->blocks;
    str_putf(&log->calls, "header %lld/%lld", (long long)header->block_ns,
             (long long)header->blocks);
    for (size_t i = 0; i < header->channel_count; i++) {
        const struct stream_channel *channel = &header->channels[i];
        log->block_values += (size_t)channel->samples;
        str_putf(&log->calls, " %s|%s|%d|%s|%s|%a|%a|%d|%d|%d", channel->label, channel->unit,
                 (int)channel->role, channel->transducer, channel->prefilter, channel->physical_min,
                 channel->physical_max, channel->digital_min, channel->digital_max,
                 channel->samples);
        if (i >= LOG_CHANNELS_MOST)
            continue;
        log->channels[i] = *channel;
        (void)snprintf(log->labels[i], LABEL_SIZE, "%.39s", channel->label);
        (void)snprintf(log->units[i], LABEL_SIZE, "%.39s", channel->unit);
    }
    str_putc(&log->calls, '\n');
    return ERR_OK;
}

static int take_block(void *context, int64_t own_ns, const float *samples, struct err *err)
{
    struct stream_log *log = context;
    cr_assert_gt(log->headers, 0, "a block before any header");
    int failed = array_reserve((void **)&log->values, &log->value_room,
                               log->value_count + log->block_values, sizeof *samples, err);
    if (!failed)
        failed = array_reserve((void **)&log->own_ns, &log->block_room, log->block_count + 1,
                               sizeof *log->own_ns, err);
    if (failed)
        return failed;
    memcpy(log->values + log->value_count, samples, log->block_values * sizeof *samples);
    log->value_count += log->block_values;
    log->own_ns[log->block_count++] = own_ns;
    str_putf(&log->calls, "%lld:", (long long)own_ns);
    for (size_t i = 0; i < log->block_values; i++)
        str_putf(&log->calls, " %a", (double)samples[i]);
    str_putc(&log->calls, '\n');
    return ERR_OK;
}

/* ---- playing ---- */

/* Pieces of at most `most` bytes: all that long when `seed` is 0, of random length otherwise. */
static struct stream_log play(const struct input *input, size_t most, uint32_t seed)
{
    struct stream_log log = {0};
    struct stream_sink sink = {take_header, take_block, &log};
    struct stream_parser *parser = NULL;
    struct err err = {0};
    size_t at = 0, next_break = 0;
    cr_assert_eq(stream_parser_new(input->rate_hz, &sink, &parser, &err), 0, "%s", err.text);
    while (at < input->bytes.length || next_break < input->break_count) {
        size_t end = input->bytes.length;
        if (next_break < input->break_count && input->breaks[next_break] == at) {
            stream_parser_break(parser);
            next_break++;
            continue;
        }
        if (next_break < input->break_count)
            end = input->breaks[next_break];
        size_t part = end - at < most ? end - at : most;
        if (seed) {
            seed = seed * 1664525u + 1013904223u;
            part = 1 + (seed >> 8) % part;
        }
        /* A copy of its own: reading beyond the piece is seen. */
        void *piece = malloc(part);
        cr_assert_not_null(piece);
        memcpy(piece, input->bytes.text + at, part);
        cr_assert_eq(stream_parser_feed(parser, piece, part, &err), 0, "%s", err.text);
        free(piece);
        at += part;
    }
    log.garbled = stream_parser_garbled(parser);
    (void)snprintf(log.complaint, sizeof log.complaint, "%s", stream_parser_complaint(parser));
    stream_parser_free(parser);
    cr_assert(!str_failed(&log.calls));
    return log;
}

static void expect_same(const struct stream_log *whole, struct stream_log *pieces, const char *how)
{
    if (strcmp(str_text(&whole->calls), str_text(&pieces->calls)) != 0)
        cr_assert_fail("%s: other calls than at once:\n%.2000s\n--- not\n%.2000s", how,
                       str_text(&pieces->calls), str_text(&whole->calls));
    cr_assert_eq(whole->garbled, pieces->garbled, "%s: %lld garbled, not %lld", how,
                 (long long)pieces->garbled, (long long)whole->garbled);
    cr_assert_str_eq(whole->complaint, pieces->complaint, "%s", how);
    stream_log_free(pieces);
}

struct stream_log input_play(struct input *input)
{
    struct stream_log whole = play(input, SIZE_MAX, 0);
    struct stream_log pieces = play(input, 1, 0);
    expect_same(&whole, &pieces, "byte by byte");
    for (uint32_t seed = 1; seed <= RANDOM_PLAYS; seed++) {
        static const size_t most[] = {7, 100, 3000};
        pieces = play(input, most[seed % 3], seed);
        expect_same(&whole, &pieces, "in random pieces");
    }
    str_free(&input->bytes);
    return whole;
}

void stream_log_free(struct stream_log *log)
{
    str_free(&log->calls);
    free(log->own_ns);
    free(log->values);
}
