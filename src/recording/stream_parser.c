/*
 * stream_parser.c - telling lines and records apart, and handing each to its parser.
 */
#include "recording/stream_parser.h"

#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "recording/stream_parser_impl.h"

enum mode { MODE_UNKNOWN, MODE_LINES, MODE_RECORDS };

struct stream_parser {
    enum mode mode, before; /* before: what it was until the connection broke */
    uint8_t head[SIGNATURE_SIZE];
    size_t head_size; /* first bytes, while nobody knows what they are */
    struct line_stream *lines;
    struct record_stream *records;
    struct complaints complaints;
};

void complain(struct complaints *complaints, int64_t by, const char *format, ...)
{
    va_list args;
    va_start(args, format);
    (void)vsnprintf(complaints->last, sizeof complaints->last, format, args);
    va_end(args);
    complaints->count += by;
}

int stream_parser_new(double rate_hz, const struct stream_sink *sink, struct stream_parser **out,
                      struct err *err)
{
    struct stream_parser *made = calloc(1, sizeof *made);
    if (!made)
        return err_memory(err, "a stream");
    int failed = line_stream_new(rate_hz, sink, &made->complaints, &made->lines, err);
    if (!failed)
        failed = record_stream_new(sink, &made->complaints, &made->records, err);
    if (failed)
        stream_parser_free(made);
    else
        *out = made;
    return failed;
}

void stream_parser_free(struct stream_parser *parser)
{
    if (!parser)
        return;
    line_stream_free(parser->lines);
    record_stream_free(parser->records);
    free(parser);
}

int stream_parser_assume(struct stream_parser *parser, const char *const *headers, size_t count,
                         double rate_hz, struct err *err)
{
    return line_stream_assume(parser->lines, headers, count, rate_hz, err);
}

static int feed(struct stream_parser *parser, const uint8_t *bytes, size_t count, struct err *err)
{
    return parser->mode == MODE_LINES
               ? line_stream_feed(parser->lines, (const char *)bytes, count, err)
               : record_stream_feed(parser->records, bytes, count, err);
}

/* Takes first bytes until they tell. A record stream that broke off goes on as one: its bytes are
 * skipped up to the next header. */
static int find_mode(struct stream_parser *parser, const uint8_t **bytes, size_t *count,
                     struct err *err)
{
    while (*count > 0 && parser->mode == MODE_UNKNOWN) {
        parser->head[parser->head_size++] = *(*bytes)++;
        (*count)--;
        bool could = record_signature(parser->head, parser->head_size);
        if (parser->before == MODE_RECORDS || (could && parser->head_size == SIGNATURE_SIZE))
            parser->mode = MODE_RECORDS;
        else if (!could)
            parser->mode = MODE_LINES;
    }
    if (parser->mode == MODE_UNKNOWN)
        return ERR_OK;
    size_t head = parser->head_size;
    parser->head_size = 0;
    return feed(parser, parser->head, head, err);
}

int stream_parser_feed(struct stream_parser *parser, const void *bytes, size_t count,
                       struct err *err)
{
    const uint8_t *at = bytes;
    int failed = ERR_OK;
    if (parser->mode == MODE_UNKNOWN)
        failed = find_mode(parser, &at, &count, err);
    return failed || count == 0 ? failed : feed(parser, at, count, err);
}

void stream_parser_break(struct stream_parser *parser)
{
    if (parser->head_size > 0)
        complain(&parser->complaints, 1, "broke off after %zu bytes", parser->head_size);
    parser->head_size = 0;
    if (parser->mode == MODE_LINES)
        line_stream_break(parser->lines);
    else if (parser->mode == MODE_RECORDS)
        record_stream_break(parser->records);
    parser->before = parser->mode != MODE_UNKNOWN ? parser->mode : parser->before;
    parser->mode = MODE_UNKNOWN;
    /* A line stream with a header may be joined anywhere; one that sends records now is seen too.
     */
    if (parser->before == MODE_LINES && !line_stream_has_header(parser->lines))
        parser->before = MODE_UNKNOWN;
}

int64_t stream_parser_garbled(const struct stream_parser *parser)
{
    return parser->complaints.count;
}

const char *stream_parser_complaint(const struct stream_parser *parser)
{
    return parser->complaints.last;
}
