/*
 * err.c - filling struct err. Knows no module's errors and prints nothing.
 */
#include "base/err.h"

#include <errno.h>
#include <stdarg.h>
#include <stdio.h>
#include <string.h>

int err_set(struct err *err, int code, const char *format, ...)
{
    if (!err)
        return code;
    va_list args;
    va_start(args, format);
    err->code = code;
    /* A message longer than the buffer is cut: its beginning names what and where. */
    (void)vsnprintf(err->text, sizeof err->text, format, args);
    va_end(args);
    return code;
}

int err_memory(struct err *err, const char *what)
{
    return err_set(err, ERR_MEMORY, "out of memory: %s; close other programs and try again", what);
}

int err_errno(struct err *err, const char *path, const char *what)
{
    return err_set(err, ERR_IO, "%s: cannot %s: %s", path, what, strerror(errno));
}

int err_prefix(struct err *err, const char *format, ...)
{
    if (!err)
        return ERR_OK;
    char old[sizeof err->text];
    memcpy(old, err->text, sizeof old);
    va_list args;
    va_start(args, format);
    int used = vsnprintf(err->text, sizeof err->text, format, args);
    va_end(args);
    if (used < 0 || (size_t)used >= sizeof err->text - 2)
        return err->code;
    (void)snprintf(err->text + used, sizeof err->text - (size_t)used, ": %.*s",
                   (int)(sizeof err->text - (size_t)used - 3), old);
    return err->code;
}
