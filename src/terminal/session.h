/*
 * session.h - the terminal itself: taking it over, events out of it, canvases onto it, and giving
 * it back whatever happens.
 *
 * ncurses sets the terminal up and reads keys; painting goes through painter.h in one write a
 * frame. The terminal is given back on session_close(), on ^Z (until the program goes on), when
 * the program is told to end, and when it crashes.
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

/* Fails with ERR_USAGE when standard input or output is no terminal, or TERM says nothing. */
MUST_CHECK int session_open(struct session **out, struct err *err);
void session_close(struct session *session);

void session_size(const struct session *session, int *rows, int *columns);

/* Waits for the next event, at most timeout_ms (negative: as long as it takes). The event carries
 * the time at which input woke the program. */
void session_wait(struct session *session, int timeout_ms, struct event *out);

/* Shows a canvas; only what changed is sent. */
MUST_CHECK int session_show(struct session *session, const struct canvas *canvas, struct err *err);
/* What is on the screen is not known any more: the next show paints everything. */
void session_repaint(struct session *session);

#endif
