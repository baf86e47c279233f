/*
 * line_header.c - what may be a header of streamed lines, and which columns it says. Whether it is
 * one, the row behind it tells (line_stream.c).
 */
#include <string.h>

#include "recording/csv_columns.h"
#include "recording/line_stream_impl.h"
#include "recording/reader.h"

/* Text, in UTF-8 or else in Latin-1, where 80 to 9F are no characters either. */
static bool printable(const char *text)
{
    bool utf8 = utf8_valid(text, strlen(text));
    for (const unsigned char *at = (const unsigned char *)text; *at; at++) {
        if (*at < ' ' || *at == 127 || (!utf8 && *at >= 0x80 && *at < 0xA0))
            return false;
    }
    return true;
}

static bool is_infinity(const char *text)
{
    return ascii_equal(text, "inf") || ascii_equal(text, "infinity");
}

/* The label without its unit is that of a time. */
static bool is_time(const char *text)
{
    char label[16];
    size_t length = strlen(text);
    char last = length > 0 ? text[length - 1] : '\0';
    if (last == ']' || last == ')')
        length = strcspn(text, last == ']' ? "[" : "(");
    while (length > 0 && text[length - 1] == ' ')
        length--;
    if (length >= sizeof label)
        return false;
    memcpy(label, text, length);
    label[length] = '\0';
    return csv_time_name(label);
}

bool line_header_looks(const struct line_stream *lines, int *time_column)
{
    bool like_number = false, empty = false, word = false;
    *time_column = NO_COLUMN;
    for (size_t i = 0; i < lines->field_count; i++) {
        const char *text = lines->field[i];
        double value;
        if (!*text) {
            empty = true;
            continue;
        }
        if (csv_text_missing(text) || number_parse_comma(text, &value) || !printable(text))
            return false;
        if (*time_column == NO_COLUMN && is_time(text)) {
            *time_column = (int)i;
            continue;
        }
        word = true;
        /* A number with a damaged byte. */
        like_number = like_number || strchr("+-.,0123456789", *text) || is_infinity(text);
    }
    /* Without a time, a row of damaged and missing numbers must not pass. */
    if (*time_column == NO_COLUMN && (like_number || (empty && lines->has_header)))
        return false;
    return word && (*time_column != NO_COLUMN || lines->rate_hz > 0);
}

static int add_channel(struct line_stream *lines, const char *label, const char *unit,
                       struct err *err)
{
    char why[120];
    struct stream_channel *made = &lines->channels[lines->channel_count];
    const char *name =
        *label ? stream_label(&lines->arena, lines->channels, lines->channel_count, label)
               : arena_printf(&lines->arena, "channel %zu", lines->channel_count + 1);
    if (!name)
        return err_memory(err, "a channel");
    *made = (struct stream_channel){.label = name,
                                    .unit = unit,
                                    .role = role_of_label(name, unit, why, sizeof why),
                                    .transducer = "",
                                    .prefilter = "",
                                    .samples = 1};
    lines->channel_count++;
    return ERR_OK;
}

int line_header_take(struct line_stream *lines, bool bare, int time_column, struct err *err)
{
    arena_free(&lines->arena);
    lines->channels = arena_alloc(&lines->arena, lines->field_count, sizeof *lines->channels);
    lines->channel_count = 0;
    lines->time_column = time_column;
    lines->width = lines->field_count;
    int failed = lines->channels ? ERR_OK : err_memory(err, "the channels");
    for (size_t i = 0; i < lines->field_count && !failed; i++) {
        const char *label = "", *unit = "";
        if (!bare)
            failed = csv_split_header(&lines->arena, lines->field[i], &label, &unit, err);
        if (!failed && (int)i == time_column)
            lines->time_scale = ascii_equal(unit, "ms") ? 1e6 : 1e9;
        else if (!failed)
            failed = add_channel(lines, label, unit, err);
    }
    return failed;
}
