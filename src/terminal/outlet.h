/*
 * outlet.h - bytes to the terminal, without ever waiting for it: what it does not take at once
 * stays pending and is written on when it takes more.
 *
 * Only outlet_end() waits, and not for long. Knows nothing of what the bytes mean.
 */
#ifndef TERMINAL_OUTLET_H
#define TERMINAL_OUTLET_H

#include <stdbool.h>
#include <stddef.h>

#include "base/str.h"

struct outlet {
    int fd;
    struct str bytes; /* append to it, then outlet_push() */
    size_t sent;      /* of them */
};

/* Opens standard output's terminal again, so that nobody else's output stops waiting. Where its
 * name cannot be opened standard output itself is taken, and writing may wait. */
MUST_CHECK int outlet_open(struct outlet *outlet, struct err *err);
void outlet_close(struct outlet *outlet);

bool outlet_busy(const struct outlet *outlet); /* are bytes pending? */

/* Writes what the terminal takes now. An error drops what is pending. */
MUST_CHECK int outlet_push(struct outlet *outlet, struct err *err);

/* The last words: waits at most limit_ms for what is pending, else gives it up and has the terminal
 * forget what it did not show yet; then `last`, as far as the terminal takes it. */
void outlet_end(struct outlet *outlet, const char *last, size_t length, int limit_ms);

#endif
