/*
 * session.h - the terminal itself: taking it over, events out of it, canvases onto it, and giving
 * it back whatever happens.
 *
 * ncurses sets the terminal up and makes keys of bytes; a thread takes the bytes in and stamps them
 * as they arrive (key_reader.h); painting goes through painter.h in one write a frame, and never
 * waits for the terminal (outlet.h). The terminal is given back on session_close(), on ^Z (until
 * the program goes on), when the program is told to end, and when it crashes.
 *
 * One session at a time. Signal handlers only write a byte to a pipe, so that other threads need
 * not block anything.
 */
#ifndef TERMINAL_SESSION_H
#define TERMINAL_SESSION_H

#include "base/err.h"
#include "terminal/canvas.h"
#include "terminal/keys.h"

struct session;

/* Keys come from standard input, or from /dev/tty where standard input is for data. Fails with
 * ERR_USAGE when the one or the other, or standard output, is no terminal, or TERM says nothing. */
MUST_CHECK int session_open(bool keys_from_tty, struct session **out, struct err *err);
/* Waits a moment for a terminal that has not taken everything yet, then gives up on the rest. */
void session_close(struct session *session);

void session_size(const struct session *session, int *rows, int *columns);

/* Waits for the next event, at most timeout_ms (negative: as long as it takes). A key or the mouse
 * carries the time at which its first byte arrived, however long ago that was; anything else the
 * time at which it woke the program. Meanwhile writes on what is pending. */
void session_wait(struct session *session, int timeout_ms, struct event *out);

/* Shows a canvas; only what changed is sent. Never waits: while an earlier frame is pending it
 * shows nothing and returns 0; EVENT_READY then says when to draw again. */
MUST_CHECK int session_show(struct session *session, const struct canvas *canvas, struct err *err);
/* Has the terminal not taken all of the last frame yet? */
bool session_busy(const struct session *session);
/* What is on the screen is not known any more: the next show paints everything. */
void session_repaint(struct session *session);

#endif
