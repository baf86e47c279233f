/*
 * review.h - the review screen as a model: a case, where the eye is, and what a key does to it.
 *
 * review_key() and review_action() change the model (and, through store_*, the case);
 * review_draw() draws it into a canvas and changes nothing that shows. No terminal is needed:
 * tests and `frame` use the same calls as the screen does.
 *
 * Every change of a mark is in the case's history before the call returns. A mark that could not
 * be saved is kept, shown as NOT SAVED, and tried again at every tick.
 *
 * Threads: one. Memory: the model owns all scratch; drawing allocates nothing.
 */
#ifndef TERMINAL_REVIEW_H
#define TERMINAL_REVIEW_H

#include <stdbool.h>
#include <stdint.h>

#include "base/err.h"
#include "case/casefile.h"
#include "terminal/actions.h"
#include "terminal/canvas.h"

struct event;
struct review;

/* Looks at a case, which must outlive it. Starts at the case's first instant, 10 s wide. */
MUST_CHECK int review_new(struct casefile *casefile, struct review **out, struct err *err);
void review_free(struct review *review);

/* The screen has this many cells from now on. Any size is taken. */
MUST_CHECK int review_resize(struct review *review, int rows, int columns, struct err *err);

/* Shows [at, at + width) with the cursor at `at`; centred: around it. Both are clamped to what the
 * case holds. width_ns 0 keeps the width. */
void review_look(struct review *review, int64_t at_ns, int64_t width_ns, bool centred);

/* Says something in the last line, until the next key. */
void review_remark(struct review *review, const char *text);

/* What happened: a key or the mouse. */
void review_key(struct review *review, const struct event *event);
void review_action(struct review *review, enum action action);

/* Drops the code's mark at the cursor, or closes its open span. */
void review_mark(struct review *review, const struct code *code);

/* Time passed: takes in what other connections changed, tries again to save what was not saved.
 * true when the screen may look different now. */
bool review_tick(struct review *review);

/* Tries once more to save what is not saved; an error names the marks that are lost otherwise. */
MUST_CHECK int review_leave(struct review *review, struct err *err);

bool review_done(const struct review *review); /* asked to leave, and nothing is unsaved */
bool review_repaint(struct review *review);    /* asked for a fresh painting, once */
int64_t review_cursor(const struct review *review);
int64_t review_chosen(const struct review *review); /* id of the chosen mark; 0 = none */
/* Does what is on screen wait for an overview? Known after drawing. */
bool review_waits(const struct review *review);

/* Draws into a canvas of the size given to review_resize(). */
void review_draw(struct review *review, struct canvas *canvas);

/* The session: the case on the terminal, until left. at_ns NS_NONE = from the start. `remark` is
 * said first; "" = nothing. */
MUST_CHECK int review_run(struct casefile *casefile, int64_t at_ns, const char *remark,
                          struct err *err);

#endif
