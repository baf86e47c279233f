/*
 * keys.h - what reaches a screen from outside: keys, mouse, resizes, time passing.
 *
 * A key is a code point, or one of the names below, which lie beyond Unicode.
 */
#ifndef TERMINAL_KEYS_H
#define TERMINAL_KEYS_H

#include <stdbool.h>
#include <stdint.h>

#define KEY_IS_CTRL(letter) ((letter)&31u)
#define KEY_IS_F(number)    (KEY_IS_F0 + (number))

enum {
    KEY_IS_TAB = 9,
    KEY_IS_ENTER = 13,
    KEY_IS_ESCAPE = 27,
    KEY_IS_LEFT = 0x110000,
    KEY_IS_RIGHT,
    KEY_IS_UP,
    KEY_IS_DOWN,
    KEY_IS_PAGE_UP,
    KEY_IS_PAGE_DOWN,
    KEY_IS_HOME,
    KEY_IS_END,
    KEY_IS_INSERT,
    KEY_IS_DELETE,
    KEY_IS_BACKSPACE,
    KEY_IS_BACK_TAB,
    KEY_IS_CTRL_LEFT,
    KEY_IS_CTRL_RIGHT,
    KEY_IS_CTRL_UP,
    KEY_IS_CTRL_DOWN,
    KEY_IS_F0, /* F1 is KEY_IS_F(1), up to F12 */
    KEY_IS_LAST = KEY_IS_F0 + 12
};

enum event_kind {
    EVENT_NOTHING, /* input that means nothing here */
    EVENT_KEY,
    EVENT_MOUSE,
    EVENT_RESIZE, /* the screen has another size, or was covered: draw again */
    EVENT_READY,  /* the terminal has all of a frame that it did not take at once: draw again */
    EVENT_TICK,   /* the wait is over and nothing came */
    EVENT_END,    /* the terminal is gone, or the program was asked to end */
};

enum mouse_action { MOUSE_PRESS, MOUSE_WHEEL_UP, MOUSE_WHEEL_DOWN };

struct event {
    enum event_kind kind;
    uint32_t key;
    enum mouse_action mouse;
    int row, column;     /* of the mouse */
    int64_t boottime_ns; /* CLOCK_BOOTTIME when its first byte arrived, whatever went on then */
    int64_t utc_ns;      /* the wall clock at the same moment */
};

/* Is the key text: printable, to be put into a line or looked up in the codebook? */
bool key_is_text(uint32_t key);

#endif
