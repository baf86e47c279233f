/*
 * screen.h - a program on a terminal that is not there: a pseudo-terminal, and libvterm in the
 * place of the glass. Waits for what should appear, never for time.
 */
#ifndef TESTS_TERMINAL_SCREEN_H
#define TESTS_TERMINAL_SCREEN_H

#include <stdbool.h>
#include <vterm.h>

struct screen;

/* Starts the program, argv[0] its path, on a terminal of this size. Ends the test when it cannot.
 * SCREEN_TERM and SCREEN_LOCALE in the environment stand for xterm-256color and C.UTF-8. */
struct screen *screen_start(int rows, int columns, const char *const *argv);

/* Types text as it is; presses a key that has a name. */
void screen_type(struct screen *screen, const char *text);
void screen_press(struct screen *screen, VTermKey key);
void screen_control(struct screen *screen, char letter);
void screen_resize(struct screen *screen, int rows, int columns);

/* Waits, at most some seconds, until a row holds the text (or none does any more). */
bool screen_shows(struct screen *screen, const char *text);
bool screen_loses(struct screen *screen, const char *text);
/* A row as UTF-8, valid until the next call. */
const char *screen_row(struct screen *screen, int row);
/* Is the program on the alternate screen? */
bool screen_taken(const struct screen *screen);
/* Waits until it has left the alternate screen. */
bool screen_left(struct screen *screen);
/* Waits until the terminal is in its ordinary mode: lines, echo, ^C, ^S; or has none of these. */
bool screen_cooked(const struct screen *screen);
bool screen_raw(const struct screen *screen);

/* Waits until the program is stopped, as by ^Z. */
bool screen_stopped(const struct screen *screen);

/* Waits until the program ends; its exit status, -1 when it does not end or was killed. Frees. */
int screen_end(struct screen *screen);
/* Sends the program a signal. */
void screen_signal(struct screen *screen, int number);

/* "ok WHAT" or "not ok WHAT" with the screen as it is; counts. */
void screen_check(struct screen *screen, bool good, const char *what);
/* Exit status for main(). */
int screen_result(void);

#endif
