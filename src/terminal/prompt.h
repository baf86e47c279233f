/*
 * prompt.h - a line of text being typed: what it holds and what keys do to it. Knows nothing of
 * what the text is for.
 */
#ifndef TERMINAL_PROMPT_H
#define TERMINAL_PROMPT_H

#include <stdbool.h>
#include <stddef.h>

#include "terminal/canvas.h"

struct event;

enum { PROMPT_SIZE = 256 };

struct prompt {
    bool open;
    char label[80];         /* "propofol, value" */
    char text[PROMPT_SIZE]; /* UTF-8 */
    size_t at;              /* byte where the next character goes */
    bool offered;           /* the text is an offer: the first character typed replaces it */
    char problem[200];      /* what was wrong with the last Enter; "" when nothing */
};

enum prompt_answer {
    PROMPT_GOES_ON,
    PROMPT_TAKEN,   /* Enter: the owner reads text, then closes it or sets its problem */
    PROMPT_LEFT,    /* Esc: closed */
    PROMPT_IGNORED, /* a key it has no use for */
};

/* Opens with `text` as an offer (may be ""). */
void prompt_open(struct prompt *prompt, const char *label, const char *text);
void prompt_close(struct prompt *prompt);
enum prompt_answer prompt_key(struct prompt *prompt, const struct event *event);

/* One row: label, text with the place of typing, and the problem or what Enter and Esc do. */
void prompt_draw(const struct prompt *prompt, struct canvas *canvas, int row, int column,
                 int columns);

#endif
