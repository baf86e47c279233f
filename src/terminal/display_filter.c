/*
 * display_filter.c - choices of display filter and running them. Coefficients are dsp/biquad's.
 */
#include "terminal/display_filter.h"

#include <stdio.h>

#include "dsp/biquad.h"

/* Corners in common use on recorders: drift of the baseline; monitoring and diagnostic bands. */
static const double high_pass_hz[] = {0, 0.05, 0.5, 1, 5};
static const double low_pass_hz[] = {0, 150, 70, 40, 15, 5};
static const double notch_hz[] = {0, 50, 60};

enum {
    HIGH_PASS_COUNT = sizeof high_pass_hz / sizeof *high_pass_hz,
    LOW_PASS_COUNT = sizeof low_pass_hz / sizeof *low_pass_hz,
    NOTCH_COUNT = sizeof notch_hz / sizeof *notch_hz,
};

static const double notch_q = 25;           /* 2 Hz wide at 50 Hz */
static const double highest_of_rate = 0.45; /* beyond it the corner is no longer where it says */

bool display_filter_on(const struct display_filter *filter)
{
    return filter->high_pass > 0 || filter->low_pass > 0 || filter->notch > 0;
}

static int next_choice(int now, const double *choices, int count, double rate_hz)
{
    do
        now = (now + 1) % count;
    while (choices[now] > highest_of_rate * rate_hz);
    return now;
}

void display_filter_next_high_pass(struct display_filter *filter, double rate_hz)
{
    filter->high_pass = next_choice(filter->high_pass, high_pass_hz, HIGH_PASS_COUNT, rate_hz);
}

void display_filter_next_low_pass(struct display_filter *filter, double rate_hz)
{
    filter->low_pass = next_choice(filter->low_pass, low_pass_hz, LOW_PASS_COUNT, rate_hz);
}

void display_filter_next_notch(struct display_filter *filter, double rate_hz)
{
    filter->notch = next_choice(filter->notch, notch_hz, NOTCH_COUNT, rate_hz);
}

void display_filter_text(const struct display_filter *filter, char out[FILTER_TEXT_SIZE])
{
    size_t at = 0;
    out[0] = '\0';
    if (filter->high_pass > 0 && filter->low_pass > 0)
        at = (size_t)snprintf(out, FILTER_TEXT_SIZE, "%g-%g Hz", high_pass_hz[filter->high_pass],
                              low_pass_hz[filter->low_pass]);
    else if (filter->high_pass > 0)
        at = (size_t)snprintf(out, FILTER_TEXT_SIZE, ">%g Hz", high_pass_hz[filter->high_pass]);
    else if (filter->low_pass > 0)
        at = (size_t)snprintf(out, FILTER_TEXT_SIZE, "<%g Hz", low_pass_hz[filter->low_pass]);
    if (filter->notch > 0)
        (void)snprintf(out + at, FILTER_TEXT_SIZE - at, "%snot %g", at > 0 ? " " : "",
                       notch_hz[filter->notch]);
}

int64_t display_filter_margin(const struct display_filter *filter, double rate_hz)
{
    /* A high-pass settles within a few times rate / corner; 1 s is plenty for the others. */
    double slowest_hz = filter->high_pass > 0 ? high_pass_hz[filter->high_pass] : 1;
    return (int64_t)(rate_hz * (slowest_hz < 1 ? 1 / slowest_hz : 1)) + 1;
}

void display_filter_apply(const struct display_filter *filter, double rate_hz, float *samples,
                          size_t count)
{
    struct filter chain = {0};
    int failed = 0;
    if (filter->high_pass > 0)
        failed = filter_add_highpass(&chain, 2, high_pass_hz[filter->high_pass], rate_hz, NULL);
    if (!failed && filter->low_pass > 0)
        failed = filter_add_lowpass(&chain, 2, low_pass_hz[filter->low_pass], rate_hz, NULL);
    if (!failed && filter->notch > 0)
        failed = filter_add_notch(&chain, notch_hz[filter->notch], notch_q, rate_hz, NULL);
    /* Choices were checked against the rate, so that only a programming error fails: show raw. */
    if (!failed)
        filter_both_ways(&chain, samples, count);
}
