/*
 * edf_annotations.c - the grammar of annotation lists. Knows no records and no files.
 */
#include "recording/edf_annotations.h"

#include <ctype.h>
#include <string.h>

#include "base/ns.h"

enum { TEXT_END = 0x14, DURATION_MARK = 0x15 };

void tal_begin(struct tal_reader *reader, const uint8_t *bytes, size_t size)
{
    *reader = (struct tal_reader){.bytes = bytes, .size = size};
}

/* [+-] digits [. digits] as exact ns, moving *at past it. A sign is mandatory in an onset; makers
 * leave it out, and there is only one way to read it then. */
static bool seconds(const struct tal_reader *reader, size_t *at, int64_t *out)
{
    size_t i = *at;
    bool negative = false, any = false;
    int64_t whole = 0, fraction = 0, unit = NS_PER_S;
    if (i < reader->size && (reader->bytes[i] == '+' || reader->bytes[i] == '-'))
        negative = reader->bytes[i++] == '-';
    for (; i < reader->size && isdigit(reader->bytes[i]); i++, any = true) {
        whole = whole * 10 + (reader->bytes[i] - '0');
        if (whole > INT64_MAX / NS_PER_S / 20)
            return false;
    }
    if (i < reader->size && reader->bytes[i] == '.') {
        for (i++; i < reader->size && isdigit(reader->bytes[i]); i++) {
            unit /= 10;
            fraction += unit * (reader->bytes[i] - '0');
        }
    }
    if (!any)
        return false;
    *at = i;
    *out = (whole * NS_PER_S + fraction) * (negative ? -1 : 1);
    return true;
}

/* Reads "onset [ 0x15 duration ] 0x14". */
static bool begin_list(struct tal_reader *reader)
{
    size_t at = reader->at;
    int64_t onset_ns, span_ns = 0;
    if (!seconds(reader, &at, &onset_ns))
        return false;
    if (at < reader->size && reader->bytes[at] == DURATION_MARK) {
        at++;
        /* An empty duration is met in files; it says nothing. */
        if (at < reader->size && reader->bytes[at] != TEXT_END && !seconds(reader, &at, &span_ns))
            return false;
    }
    if (at >= reader->size || reader->bytes[at] != TEXT_END)
        return false;
    reader->at = at + 1;
    reader->onset_ns = onset_ns;
    reader->span_ns = span_ns > 0 ? span_ns : 0;
    reader->inside = true;
    return true;
}

/* Past the zero byte that ends the list we are in. */
static void skip_list(struct tal_reader *reader)
{
    const uint8_t *zero = memchr(reader->bytes + reader->at, 0, reader->size - reader->at);
    reader->at = zero ? (size_t)(zero - reader->bytes) + 1 : reader->size;
    reader->inside = false;
}

bool tal_next(struct tal_reader *reader, struct tal_text *out)
{
    while (reader->at < reader->size) {
        const uint8_t *from = reader->bytes + reader->at;
        if (*from == 0) {
            reader->at++;
            reader->inside = false;
        } else if (!reader->inside) {
            if (!begin_list(reader)) {
                reader->malformed++;
                skip_list(reader);
            }
        } else {
            const uint8_t *end = memchr(from, TEXT_END, reader->size - reader->at);
            const uint8_t *zero = memchr(from, 0, reader->size - reader->at);
            if (!end || (zero && zero < end)) {
                reader->malformed++;
                skip_list(reader);
                continue;
            }
            *out = (struct tal_text){reader->onset_ns, reader->span_ns, from, (size_t)(end - from)};
            reader->at += (size_t)(end - from) + 1;
            return true;
        }
    }
    return false;
}

bool tal_record_onset(const uint8_t *bytes, size_t size, int64_t *onset_ns)
{
    struct tal_reader reader;
    tal_begin(&reader, bytes, size);
    if (size == 0 || !begin_list(&reader))
        return false;
    *onset_ns = reader.onset_ns;
    return true;
}
