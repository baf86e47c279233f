/*
 * reader_text.c - what a reader was told (rate, start, units, roles) as text in the store, and
 * back, so that a recording opens the same way each time.
 */
#include <string.h>

#include "base/array.h"
#include "case/casefile_impl.h"

static void put_list(struct str *out, const char *name, const char *const *texts, size_t count)
{
    for (size_t i = 0; i < count; i++)
        str_putf(out, "%s=%s\n", name, texts[i]);
}

int options_text(const struct reader_options *options, struct str *out, struct err *err)
{
    if (options->rate_hz > 0) {
        str_put(out, "rate=");
        str_put_double(out, options->rate_hz);
        str_putc(out, '\n');
    }
    if (options->start_civil_ns != 0)
        str_putf(out, "start=%lld\n", (long long)options->start_civil_ns);
    put_list(out, "unit", options->units, options->unit_count);
    put_list(out, "role", options->roles, options->role_count);
    return str_failed(out) ? err_memory(err, "reader options") : ERR_OK;
}

/* The values of all lines "NAME=...", in the arena. */
static int take_list(const char *text, const char *name, struct arena *arena,
                     const char *const **out, size_t *count, struct err *err)
{
    size_t lines = 1, length = strlen(name);
    for (const char *c = text; *c; c++)
        lines += *c == '\n';
    const char **made = arena_alloc(arena, lines, sizeof *made);
    if (!made)
        return err_memory(err, "reader options");
    *count = 0;
    for (const char *line = text; *line;) {
        size_t line_length = strcspn(line, "\n");
        if (line_length > length && strncmp(line, name, length) == 0 && line[length] == '=') {
            char *value = arena_string_n(arena, line + length + 1, line_length - length - 1);
            if (!value)
                return err_memory(err, "reader options");
            made[(*count)++] = value;
        }
        line += line_length + (line[line_length] == '\n');
    }
    *out = made;
    return ERR_OK;
}

int options_parse(const char *text, struct arena *arena, struct reader_options *out,
                  struct err *err)
{
    struct reader_options made = {0};
    const char *const *rates, *const *starts;
    size_t rate_count, start_count;
    int failed = take_list(text, "rate", arena, &rates, &rate_count, err);
    if (!failed)
        failed = take_list(text, "unit", arena, &made.units, &made.unit_count, err);
    if (!failed)
        failed = take_list(text, "role", arena, &made.roles, &made.role_count, err);
    if (!failed)
        failed = take_list(text, "start", arena, &starts, &start_count, err);
    if (!failed && start_count > 0 && !integer_parse(starts[0], &made.start_civil_ns))
        failed = err_set(err, ERR_FORMAT, "stored start '%s' is not a number", starts[0]);
    if (!failed && rate_count > 0 && !number_parse(rates[0], &made.rate_hz))
        failed = err_set(err, ERR_FORMAT, "stored rate '%s' is not a number", rates[0]);
    if (!failed)
        *out = made;
    return failed;
}
