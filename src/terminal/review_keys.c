/*
 * review_keys.c - from an event to what it does: the line being typed, the help panel, the
 * codebook's letters, the actions' keys, the mouse.
 */
#include "terminal/keys.h"
#include "terminal/review_impl.h"

static bool is_letter(uint32_t key)
{
    return (key >= 'a' && key <= 'z') || (key >= 'A' && key <= 'Z') || key > 0xa0;
}

static void prompt_event(struct review *review, const struct event *event)
{
    enum prompt_answer answer = prompt_key(&review->prompt, event);
    if (answer == PROMPT_TAKEN)
        review_take_entry(review);
    else if (answer == PROMPT_LEFT && review->asking == ASK_VALUE)
        review_say(review, INK_DIM, "left as it was; Enter asks again");
}

static void help_event(struct review *review, const struct event *event)
{
    enum action action = action_of_key(event);
    if (event->key == ' ' || event->key == KEY_IS_PAGE_DOWN)
        review->help_page++;
    else if (event->key == KEY_IS_PAGE_UP && review->help_page > 0)
        review->help_page--;
    else if (action == ACTION_QUIT || action == ACTION_REDRAW)
        review_action(review, action);
    else
        review->help_open = false;
}

static void letter(struct review *review, uint32_t key)
{
    const struct code *code = codebook_by_key(casefile_codebook(review->casefile), key);
    if (code) {
        review_mark(review, code);
        return;
    }
    char text[5] = "";
    text[utf8_put(text, key)] = '\0';
    review_say(review, INK_WARN, "no code has the key '%s'; ? shows those that do", text);
}

static bool inside(const struct part *part, const struct event *event)
{
    return event->row >= part->row && event->row < part->row + part->rows &&
           event->column >= part->column && event->column < part->column + part->columns;
}

static void press_list(struct review *review, const struct event *event)
{
    size_t index = list_first(review) + (size_t)(event->row - review->layout.list.row) - 1;
    if (event->row > review->layout.list.row && index < review->mark_count)
        review_choose(review, index);
}

static void mouse_event(struct review *review, const struct event *event)
{
    const struct layout *layout = &review->layout;
    const struct view *view = &review->view;
    if (event->mouse != MOUSE_PRESS) {
        review_action(review, event->mouse == MOUSE_WHEEL_UP ? ACTION_ZOOM_IN : ACTION_ZOOM_OUT);
        return;
    }
    int cell = event->column - layout->gutter;
    if (inside(&layout->list, event))
        press_list(review, event);
    else if (inside(&layout->strip, event))
        review_go(review, review->extent_from_ns +
                              mul_div(event->column, review->extent_to_ns - review->extent_from_ns,
                                      layout->strip.columns));
    else if (event->row >= layout->axis.row && cell >= 0 && cell < view->cells &&
             event->row < layout->rail.row + layout->rail.rows)
        review_go(review,
                  view->from_ns + mul_div(2 * cell + 1, view->span_ns, 2 * (int64_t)view->cells));
}

static void key_event(struct review *review, const struct event *event)
{
    enum action action = action_of_key(event);
    review->said[0] = '\0';
    review->met_keys = true;
    if (action != ACTION_QUIT)
        review->leaving = false;
    if (is_letter(event->key) && event->key < KEY_IS_LEFT)
        letter(review, event->key);
    else if (action != ACTION_NONE)
        review_action(review, action);
    else if (event->key != KEY_IS_ESCAPE)
        review_say(review, INK_DIM, "that key does nothing here; ? shows those that do");
}

void review_key(struct review *review, const struct event *event)
{
    if (review->prompt.open)
        prompt_event(review, event);
    else if (event->kind == EVENT_MOUSE && !review->help_open)
        mouse_event(review, event);
    else if (event->kind == EVENT_KEY && review->help_open)
        help_event(review, event);
    else if (event->kind == EVENT_KEY)
        key_event(review, event);
}
