/*
 * play_target.h - where played bytes go: a FIFO, a TCP port of this machine, or a pseudo-terminal;
 * one reader after another.
 *
 *   fifo:PATH      made when missing, and left there
 *   tcp:PORT       listens on 127.0.0.1 alone; port 0 takes a free one
 *   pty:LINKPATH   a pseudo-terminal, raw, with a symbolic link to it; the link goes at the end
 *
 * Knows nothing of what the bytes mean. SIGPIPE must be ignored.
 */
#ifndef DEMO_PLAY_TARGET_H
#define DEMO_PLAY_TARGET_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "base/err.h"

struct play_target;

MUST_CHECK int play_target_open(const char *text, struct play_target **out, struct err *err);
void play_target_close(struct play_target *target); /* NULL is allowed */

/* Where a reader finds it: "fifo:PATH", "tcp:127.0.0.1:PORT", "LINKPATH". */
const char *play_target_name(const struct play_target *target);

/* Waits until until_ns of CLOCK_MONOTONIC, looking after readers meanwhile. true, at once, when one
 * has come: it has had nothing yet. */
bool play_target_wait(struct play_target *target, int64_t until_ns);

/* To the reader; waits while it takes nothing. Nobody there, or gone meanwhile: nothing is sent. */
void play_target_send(struct play_target *target, const void *bytes, size_t count);

#endif
