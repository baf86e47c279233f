/*
 * review_draw.c - the whole review screen: every part in its place.
 */
#include "terminal/review_impl.h"

void review_draw(struct review *review, struct canvas *canvas)
{
    canvas_clear(canvas);
    /* A canvas of another size than the model knows would be written beside. */
    if (canvas->rows < review->rows || canvas->columns < review->columns)
        return;
    if (review->help_open) {
        draw_help(review, canvas);
        return;
    }
    draw_strip(review, canvas);
    draw_axis(review, canvas);
    draw_lanes(review, canvas);
    draw_rail(review, canvas);
    draw_list(review, canvas);
    draw_lines(review, canvas);
}
