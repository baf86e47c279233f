/*
 * clock_text.c - writing and reading a clock's pieces. Applies none of them.
 */
#include "timeline/clock_text.h"

#include <jansson.h>

enum { NUMBERS = 5 };

void clock_text_put(struct str *out, const struct clock_piece *pieces, size_t count)
{
    str_putc(out, '[');
    for (size_t i = 0; i < count; i++)
        str_putf(out, "%s[%lld,%lld,%lld,%lld,%lld]", i ? "," : "", (long long)pieces[i].at_ns,
                 (long long)pieces[i].span_ns, (long long)pieces[i].case_ns,
                 (long long)pieces[i].case_span_ns, (long long)pieces[i].error_ns);
    str_putc(out, ']');
}

static bool read_piece(const json_t *json, struct clock_piece *out)
{
    int64_t numbers[NUMBERS];
    if (!json_is_array(json) || json_array_size(json) != NUMBERS)
        return false;
    for (size_t i = 0; i < NUMBERS; i++) {
        const json_t *number = json_array_get(json, i);
        if (!json_is_integer(number))
            return false;
        numbers[i] = (int64_t)json_integer_value(number);
    }
    *out = (struct clock_piece){numbers[0], numbers[1], numbers[2], numbers[3], numbers[4]};
    return out->span_ns > 0 && out->case_span_ns > 0 && out->error_ns >= 0;
}

static bool read_all(const json_t *json, struct clock_piece *out, size_t count)
{
    for (size_t i = 0; i < count; i++) {
        if (!read_piece(json_array_get(json, i), &out[i]))
            return false;
        if (i > 0 && (out[i].at_ns <= out[i - 1].at_ns || out[i].case_ns <= out[i - 1].case_ns))
            return false;
    }
    return true;
}

int clock_text_parse(const char *text, struct arena *arena, struct clock_piece **out, size_t *count,
                     struct err *err)
{
    *out = NULL;
    *count = 0;
    if (!*text)
        return ERR_OK;
    json_t *json = json_loads(text, 0, NULL);
    size_t size = json_array_size(json);
    struct clock_piece *pieces = arena_alloc(arena, size + 1, sizeof *pieces);
    int failed = ERR_OK;
    if (!pieces)
        failed = err_memory(err, "a clock");
    else if (!json_is_array(json) || !read_all(json, pieces, size))
        failed = err_set(err, ERR_FORMAT, "'%.80s' is no clock that can be", text);
    json_decref(json);
    if (!failed) {
        *out = pieces;
        *count = size;
    }
    return failed;
}
