/*
 * csv_header.c - what first lines and cells of CSV say: labels, units, time columns, missing
 * values. Shared by files and streams.
 */
#include <string.h>

#include "base/str.h"
#include "recording/csv_columns.h"
#include "recording/reader.h"

bool csv_text_missing(const char *text)
{
    return *text == '\0' || ascii_equal(text, "nan") || ascii_equal(text, "na") ||
           ascii_equal(text, "null") || strcmp(text, "-") == 0 || strcmp(text, "--") == 0;
}

int csv_split_header(struct arena *arena, const char *text, const char **label, const char **unit,
                     struct err *err)
{
    size_t length = strlen(text);
    const char *open = NULL;
    if (length > 0 && text[length - 1] == ']')
        open = strchr(text, '[');
    else if (length > 0 && text[length - 1] == ')')
        open = strchr(text, '(');
    size_t label_length = open ? (size_t)(open - text) : length;
    size_t unit_length = open ? length - label_length - 2 : 0;
    *label = recording_text(arena, (const uint8_t *)text, label_length);
    *unit = recording_text(arena, (const uint8_t *)(open ? open + 1 : text), unit_length);
    return *label && *unit ? ERR_OK : err_memory(err, "a column");
}

bool csv_time_name(const char *label)
{
    static const char *const names[] = {"t",         "time",     "t_s",       "time_s", "seconds",
                                        "timestamp", "datetime", "date time", "clock"};
    for (size_t i = 0; i < sizeof names / sizeof *names; i++) {
        if (ascii_equal(label, names[i]))
            return true;
    }
    return false;
}
