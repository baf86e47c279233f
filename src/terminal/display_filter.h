/*
 * display_filter.h - what a lane may filter away for the eye: drift, hum and hiss.
 *
 * Changes only what is drawn. Values read at the cursor, derivations and exports never see it.
 * Filters run forwards and backwards, so that no feature moves in time: a mark set on a filtered
 * peak is on the peak.
 */
#ifndef TERMINAL_DISPLAY_FILTER_H
#define TERMINAL_DISPLAY_FILTER_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/* Places in the tables of choices; 0 = off. */
struct display_filter {
    int high_pass, low_pass, notch;
};

bool display_filter_on(const struct display_filter *filter);

/* The next choice, which wraps round to off. A choice that the trace's rate cannot carry (a
 * corner above 0.45 of it) is passed over. */
void display_filter_next_high_pass(struct display_filter *filter, double rate_hz);
void display_filter_next_low_pass(struct display_filter *filter, double rate_hz);
void display_filter_next_notch(struct display_filter *filter, double rate_hz);

/* "0.5-40 Hz, not 50", "" when off: for the gutter and the status line. */
enum { FILTER_TEXT_SIZE = 40 };
void display_filter_text(const struct display_filter *filter, char out[FILTER_TEXT_SIZE]);

/* How many samples to read on each side beyond what is shown, for the filter to settle in. */
int64_t display_filter_margin(const struct display_filter *filter, double rate_hz);

/* Filters samples of one run, shape (count), in place; NaN stays NaN and what lies between NaNs
 * is filtered on its own. */
void display_filter_apply(const struct display_filter *filter, double rate_hz, float *samples,
                          size_t count);

#endif
