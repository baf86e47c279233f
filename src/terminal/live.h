/*
 * live.h - the live screen: letters stamp what happens now.
 *
 * A model that events act on and that draws itself into a canvas; no terminal here, so that tests
 * hand it events and look at cells. What is asked of it is saved by the saver it is given; the
 * screen only says how far that is.
 *
 * Time comes in from outside, with every event and tick: CLOCK_BOOTTIME decides, the wall clock is
 * only shown.
 */
#ifndef TERMINAL_LIVE_H
#define TERMINAL_LIVE_H

#include "case/casefile.h"
#include "case/live_stream.h"
#include "store/saver.h"
#include "terminal/canvas.h"
#include "terminal/keys.h"

struct live;

/* Everything must outlive the screen. */
struct live_setup {
    const struct casefile *casefile; /* its store belongs to the saver */
    const char *procedure;
    const struct live_session *session;
    struct saver *saver;
    struct live_stream *const *streams; /* shape (stream_count) */
    const char *const *sources;         /* as given, shape (stream_count) */
    size_t stream_count;
    const struct mark *marks; /* those the case has already, shape (mark_count); copied */
    size_t mark_count;
    const char *remark; /* shown first; "" = none */
};

MUST_CHECK int live_new(const struct live_setup *setup, struct live **out, struct err *err);
void live_free(struct live *live);

MUST_CHECK int live_resize(struct live *live, int rows, int columns, struct err *err);

/* One event; its boottime_ns is when it happened. */
void live_event(struct live *live, const struct event *event);
/* Time has passed: takes in what streamed, what was saved, what others changed. */
void live_tick(struct live *live, int64_t boottime_ns, int64_t utc_ns);
void live_draw(struct live *live, struct canvas *canvas);
bool live_done(const struct live *live);
/* Was a full repaint of the terminal asked for? Resets it. */
bool live_repaint(struct live *live);

/* Marks that the model holds: for tests, and for a last word about those that are nowhere. */
size_t live_mark_count(const struct live *live);
const struct mark *live_mark(const struct live *live, size_t index);
/* Is the newest state of a mark durable in the case? */
bool live_mark_saved(struct live *live, size_t index);

/* The tool's keys on this screen, for help: false past the last. */
bool live_tool_key(size_t index, const char **key, const char **text);

/* The screen on the terminal until it is left. */
MUST_CHECK int live_run(const struct live_setup *setup, bool keys_from_tty, struct err *err);

#endif
