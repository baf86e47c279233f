/*
 * prompt.c - typing into one line, and drawing it.
 */
#include "terminal/prompt.h"

#include <stdio.h>
#include <string.h>

#include "terminal/keys.h"

void prompt_open(struct prompt *prompt, const char *label, const char *text)
{
    *prompt = (struct prompt){.open = true, .offered = *text != '\0'};
    (void)snprintf(prompt->label, sizeof prompt->label, "%s", label);
    (void)snprintf(prompt->text, sizeof prompt->text, "%s", text);
    /* A text cut in the middle of a character would not be UTF-8 any more. */
    while (!utf8_valid(prompt->text, strlen(prompt->text)))
        prompt->text[strlen(prompt->text) - 1] = '\0';
    prompt->at = strlen(prompt->text);
}

void prompt_close(struct prompt *prompt)
{
    *prompt = (struct prompt){0};
}

static bool continues(char byte)
{
    return ((unsigned char)byte & 0xc0) == 0x80;
}

static size_t before(const struct prompt *prompt, size_t at)
{
    while (at > 0 && continues(prompt->text[--at]))
        ;
    return at;
}

static size_t after(const struct prompt *prompt, size_t at)
{
    if (prompt->text[at])
        at++;
    while (continues(prompt->text[at]))
        at++;
    return at;
}

static void cut(struct prompt *prompt, size_t from, size_t to)
{
    memmove(prompt->text + from, prompt->text + to, strlen(prompt->text + to) + 1);
    prompt->at = from;
}

static void insert(struct prompt *prompt, uint32_t code)
{
    char bytes[4];
    size_t count = utf8_put(bytes, code);
    if (prompt->offered)
        cut(prompt, 0, strlen(prompt->text));
    size_t length = strlen(prompt->text);
    if (length + count >= sizeof prompt->text)
        return;
    memmove(prompt->text + prompt->at + count, prompt->text + prompt->at, length - prompt->at + 1);
    memcpy(prompt->text + prompt->at, bytes, count);
    prompt->at += count;
}

/* Keys that move or take away; false when the key is none of them. */
static bool edit(struct prompt *prompt, uint32_t key)
{
    switch (key) {
    case KEY_IS_LEFT:
        prompt->at = before(prompt, prompt->at);
        return true;
    case KEY_IS_RIGHT:
        prompt->at = after(prompt, prompt->at);
        return true;
    case KEY_IS_HOME:
        prompt->at = 0;
        return true;
    case KEY_IS_END:
        prompt->at = strlen(prompt->text);
        return true;
    case KEY_IS_BACKSPACE:
        cut(prompt, before(prompt, prompt->at), prompt->at);
        return true;
    case KEY_IS_DELETE:
        cut(prompt, prompt->at, after(prompt, prompt->at));
        return true;
    case KEY_IS_CTRL('u'):
        cut(prompt, 0, strlen(prompt->text));
        return true;
    default:
        return false;
    }
}

enum prompt_answer prompt_key(struct prompt *prompt, const struct event *event)
{
    if (event->kind != EVENT_KEY)
        return PROMPT_IGNORED;
    if (event->key == KEY_IS_ENTER)
        return PROMPT_TAKEN;
    if (event->key == KEY_IS_ESCAPE) {
        prompt_close(prompt);
        return PROMPT_LEFT;
    }
    if (key_is_text(event->key))
        insert(prompt, event->key);
    else if (!edit(prompt, event->key))
        return PROMPT_IGNORED;
    prompt->offered = false;
    prompt->problem[0] = '\0';
    return PROMPT_GOES_ON;
}

/* Columns of cells that the first `bytes` of the text take. */
static int width_of(const char *text, size_t bytes)
{
    int width = 0;
    for (size_t i = 0; i < bytes; i++)
        width += !continues(text[i]);
    return width;
}

void prompt_draw(const struct prompt *prompt, struct canvas *canvas, int row, int column,
                 int columns)
{
    int end = column + columns;
    canvas_fill(canvas, row, column, 1, columns, ' ', INK_BAR);
    int at = canvas_printf(canvas, row, column + 1, end, INK_BAR, "%s: ", prompt->label);
    /* The end that is being typed stays in sight. */
    int room = end - at - 2, place = width_of(prompt->text, prompt->at);
    const char *text = prompt->text;
    for (; room > 0 && place > room; place--)
        (void)utf8_next(&text);
    int after_text = canvas_text(canvas, row, at, end, INK_STRONG, text);
    if (at + place >= 0 && at + place < canvas->columns && row < canvas->rows && row >= 0) {
        struct cell *cell = &canvas->cells[row * canvas->columns + at + place];
        cell->glyph = cell->glyph ? cell->glyph : ' ';
        cell->ink = INK_STRONG;
        cell->reverse = 1;
    }
    if (*prompt->problem)
        (void)canvas_text(canvas, row, after_text + 2, end, INK_ALARM, prompt->problem);
    else
        (void)canvas_text(canvas, row, after_text + 3, end, INK_BAR, "Enter keep   Esc leave");
}
