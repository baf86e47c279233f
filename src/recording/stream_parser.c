/*
 * stream_parser.c - telling lines and records apart, and handing each to its parser.
 */
#include "recording/stream_parser.h"

#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "recording/stream_parser_impl.h"

/* Rates that anyone can mean; their periods are whole numbers of ns, and fit. */
#define LEAST_HZ 1e-4
#define MOST_HZ  1e6

enum { HEAD_MOST = 64 };

enum mode { MODE_UNKNOWN, MODE_LINES, MODE_RECORDS };

struct stream_parser {
    enum mode mode, before; /* before: what it was until the connection broke */
    uint8_t head[HEAD_MOST];
    size_t head_size;                   /* first bytes, while nobody knows what they are */
    uint8_t recent[SIGNATURE_SIZE + 1]; /* last bytes of lines that have no header yet */
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

static bool taken(const struct stream_channel *channels, size_t count, const char *label)
{
    for (size_t i = 0; i < count; i++) {
        if (strcmp(channels[i].label, label) == 0)
            return true;
    }
    return false;
}

const char *stream_label(struct arena *arena, const struct stream_channel *channels, size_t count,
                         const char *label)
{
    size_t length = strlen(label), number = 1;
    const char *made = label;
    /* As many as are numbered already; a label may look numbered itself, hence the loop. */
    for (size_t i = 0; i < count; i++)
        number += strncmp(channels[i].label, label, length) == 0 &&
                  (channels[i].label[length] == '\0' ||
                   strncmp(channels[i].label + length, " #", 2) == 0);
    if (!taken(channels, count, label))
        return label;
    do {
        made = arena_printf(arena, "%s #%zu", label, number++);
    } while (made && taken(channels, count, made));
    return made;
}

int stream_parser_new(double rate_hz, const struct stream_sink *sink, struct stream_parser **out,
                      struct err *err)
{
    if (rate_hz != 0 && !(rate_hz >= LEAST_HZ && rate_hz <= MOST_HZ))
        return err_set(err, ERR_USAGE,
                       "a stream of %g rows a second cannot be; give a rate from 0.0001 to 1000000",
                       rate_hz);
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

/* Do the last bytes begin records? The signature of EDF, being text, may not stand behind text:
 * a number padded with blanks looks the same. */
static bool records_begin(const struct stream_parser *parser)
{
    const uint8_t *signature = parser->recent + 1;
    bool text = parser->recent[0] >= ' ' && parser->recent[0] < 127;
    return record_signature(signature, SIGNATURE_SIZE) && (*signature != '0' || !text);
}

/* Lines that have no header yet may be noise before that of records: looks for it at every byte. */
static int feed_watching(struct stream_parser *parser, const uint8_t **bytes, size_t *count,
                         struct err *err)
{
    int failed = ERR_OK;
    while (*count > 0 && !failed && !line_stream_has_header(parser->lines)) {
        memmove(parser->recent, parser->recent + 1, SIGNATURE_SIZE);
        parser->recent[SIGNATURE_SIZE] = **bytes;
        if (records_begin(parser)) {
            line_stream_break(parser->lines);
            line_stream_forget(parser->lines);
            parser->mode = MODE_RECORDS;
            (*bytes)++;
            (*count)--;
            return record_stream_feed(parser->records, parser->recent + 1, SIGNATURE_SIZE, err);
        }
        failed = line_stream_feed(parser->lines, (const char *)*bytes, 1, err);
        (*bytes)++;
        (*count)--;
    }
    return failed;
}

static int feed(struct stream_parser *parser, const uint8_t *bytes, size_t count, struct err *err)
{
    int failed = ERR_OK;
    if (parser->mode == MODE_LINES)
        failed = feed_watching(parser, &bytes, &count, err);
    if (failed || count == 0)
        return failed;
    return parser->mode == MODE_LINES
               ? line_stream_feed(parser->lines, (const char *)bytes, count, err)
               : record_stream_feed(parser->records, bytes, count, err);
}

static bool is_text(uint8_t byte)
{
    return (byte >= ' ' && byte < 127) || byte == '\t' || byte == '\r' || byte == '\n';
}

/* Takes first bytes until they tell. After records that broke off, what is no header is taken as
 * the rest of a record, and skipped up to a header, unless it is text for so long. */
static int find_mode(struct stream_parser *parser, const uint8_t **bytes, size_t *count,
                     struct err *err)
{
    while (*count > 0 && parser->mode == MODE_UNKNOWN) {
        uint8_t byte = *(*bytes)++;
        parser->head[parser->head_size++] = byte;
        (*count)--;
        bool could = record_signature(parser->head, parser->head_size);
        bool wait = parser->before == MODE_RECORDS && parser->head_size < HEAD_MOST;
        if (could && parser->head_size >= SIGNATURE_SIZE)
            parser->mode = MODE_RECORDS;
        else if (!could && parser->before == MODE_RECORDS && !is_text(byte))
            parser->mode = MODE_RECORDS;
        else if (!could && !wait)
            parser->mode = MODE_LINES;
    }
    if (parser->mode == MODE_UNKNOWN)
        return ERR_OK;
    if (parser->mode == MODE_RECORDS)
        line_stream_forget(parser->lines);
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
        complain(&parser->complaints,
                 parser->before == MODE_RECORDS ? (int64_t)parser->head_size : 1,
                 "broke off after %zu bytes", parser->head_size);
    parser->head_size = 0;
    memset(parser->recent, 0, sizeof parser->recent);
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
