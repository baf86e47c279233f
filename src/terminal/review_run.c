/*
 * review_run.c - the review screen on a real terminal: wait, act, draw.
 */
#include "terminal/review.h"
#include "terminal/session.h"

/* How long to wait for a key before looking at what others changed, and while overviews build. */
enum { IDLE_MS = 500, BUILDING_MS = 100 };

static int resize(struct session *session, struct review *review, struct canvas *canvas,
                  struct err *err)
{
    int rows, columns;
    session_size(session, &rows, &columns);
    int failed = review_resize(review, rows, columns, err);
    return failed ? failed : canvas_resize(canvas, rows, columns, err);
}

static int show(struct session *session, struct review *review, struct canvas *canvas,
                struct err *err)
{
    if (review_repaint(review))
        session_repaint(session);
    review_draw(review, canvas);
    return session_show(session, canvas, err);
}

/* One event; *draw is set when the screen may look different after it. */
static int step(struct session *session, struct review *review, struct canvas *canvas, bool *draw,
                bool *end, struct err *err)
{
    struct event event;
    session_wait(session, review_waits(review) ? BUILDING_MS : IDLE_MS, &event);
    *draw = true;
    switch (event.kind) {
    case EVENT_KEY:
    case EVENT_MOUSE:
        review_key(review, &event);
        *end = review_done(review);
        return ERR_OK;
    case EVENT_RESIZE:
        return resize(session, review, canvas, err);
    case EVENT_READY:
        return ERR_OK;
    case EVENT_TICK:
        *draw = review_tick(review);
        return ERR_OK;
    case EVENT_END:
        *end = true;
        return ERR_OK;
    default:
        *draw = false;
        return ERR_OK;
    }
}

static int loop(struct session *session, struct review *review, struct canvas *canvas,
                struct err *err)
{
    bool draw = true, end = false;
    int failed = ERR_OK;
    while (!failed && !end) {
        if (draw)
            failed = show(session, review, canvas, err);
        if (!failed)
            failed = step(session, review, canvas, &draw, &end, err);
    }
    return failed;
}

int review_run(struct casefile *casefile, int64_t at_ns, const char *remark, struct err *err)
{
    struct review *review = NULL;
    struct session *session = NULL;
    struct canvas canvas = {0};
    int failed = review_new(casefile, &review, err);
    if (!failed)
        failed = session_open(false, &session, err);
    if (!failed)
        failed = resize(session, review, &canvas, err);
    if (!failed && at_ns != NS_NONE)
        review_look(review, at_ns, 0, true);
    if (!failed && *remark)
        review_remark(review, remark);
    if (!failed)
        failed = loop(session, review, &canvas, err);
    session_close(session);
    if (review && !failed)
        failed = review_leave(review, err);
    canvas_free(&canvas);
    review_free(review);
    return failed;
}
