/*
 * live_run.c - the live screen on a real terminal: wait, act, draw.
 */
#include "base/machine.h"
#include "terminal/live.h"
#include "terminal/session.h"

/* Frames: as often as traces scroll smoothly, or often enough that a clock shows every second. */
enum { STREAM_MS = 80, QUIET_MS = 200 };

static int resize(struct session *session, struct live *live, struct canvas *canvas,
                  struct err *err)
{
    int rows, columns;
    session_size(session, &rows, &columns);
    int failed = live_resize(live, rows, columns, err);
    return failed ? failed : canvas_resize(canvas, rows, columns, err);
}

static int show(struct session *session, struct live *live, struct canvas *canvas, struct err *err)
{
    if (session_busy(session))
        return ERR_OK;
    if (live_repaint(live))
        session_repaint(session);
    live_draw(live, canvas);
    return session_show(session, canvas, err);
}

/* Takes every event that is there before the next frame is drawn: a stamp never waits for one. */
static int take_events(struct session *session, struct live *live, struct canvas *canvas,
                       int timeout_ms, bool *any, bool *end, struct err *err)
{
    struct event event;
    int failed = ERR_OK;
    *any = false;
    do {
        session_wait(session, timeout_ms, &event);
        timeout_ms = 0;
        if (event.kind == EVENT_END)
            *end = true;
        else if (event.kind == EVENT_RESIZE)
            failed = resize(session, live, canvas, err);
        else
            live_event(live, &event);
        *any = *any || event.kind == EVENT_KEY || event.kind == EVENT_RESIZE;
    } while (!failed && !*end && !live_done(live) &&
             (event.kind == EVENT_KEY || event.kind == EVENT_MOUSE));
    return failed;
}

static int loop(const struct live_setup *setup, struct session *session, struct live *live,
                struct canvas *canvas, struct err *err)
{
    int64_t period_ns = (setup->stream_count > 0 ? STREAM_MS : QUIET_MS) * NS_PER_MS, next = 0;
    bool end = false, any = false;
    int failed = ERR_OK;
    while (!failed && !end && !live_done(live)) {
        int64_t now = boottime_now_ns();
        int64_t wait_ns = next > now ? next - now : 0;
        if (wait_ns == 0) {
            live_tick(live, now, utc_now_ns());
            failed = show(session, live, canvas, err);
            next = now + period_ns;
            wait_ns = period_ns;
        }
        if (!failed)
            failed =
                take_events(session, live, canvas, (int)(wait_ns / NS_PER_MS) + 1, &any, &end, err);
        if (any)
            next = 0; /* what a key did is seen at once */
    }
    return failed;
}

int live_run(const struct live_setup *setup, bool keys_from_tty, struct err *err)
{
    struct live *live = NULL;
    struct session *session = NULL;
    struct canvas canvas = {0};
    int failed = live_new(setup, &live, err);
    if (!failed)
        failed = session_open(keys_from_tty, &session, err);
    if (!failed)
        failed = resize(session, live, &canvas, err);
    if (!failed)
        live_tick(live, boottime_now_ns(), utc_now_ns());
    if (!failed)
        failed = loop(setup, session, live, &canvas, err);
    session_close(session);
    canvas_free(&canvas);
    live_free(live);
    return failed;
}
