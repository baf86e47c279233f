/*
 * live_own_clock.h - whether a stream's own time goes on as its samples do, or has jumped. For
 * live_*.c alone.
 *
 * Compares the own time of each block with what counting samples makes it. The device's rate may
 * be off: slow drift of the one against the other is followed. Rows' own times jitter: a deviation
 * of less than max(5 periods, 100 ms) is a jump only when it persists for a second.
 */
#ifndef CASE_LIVE_OWN_CLOCK_H
#define CASE_LIVE_OWN_CLOCK_H

#include <stdbool.h>
#include <stdint.h>

/* Caller-owned; zeroed at the start of each stretch. */
struct own_clock {
    bool known;
    int64_t first_ns, counted_first_ns;
    double offset_ns, jitter_ns; /* followed: own time less counted time; how much it scatters */
    int suspects;                /* blocks in a row that stand off to the same side */
    int64_t suspect_since_ns;    /* counted time of the first of them */
};

enum own_answer {
    OWN_GOES_ON,
    OWN_FORWARD, /* ahead by *ahead_ns: so much is missing */
    OWN_LEAP,    /* backward, or forward by more than an hour: the clock was set */
};

/* A block with its own time (NS_NONE: none) whose first sample is counted_ns after the start of the
 * stretch. */
enum own_answer own_clock_see(struct own_clock *clock, int64_t own_ns, int64_t counted_ns,
                              int64_t period_ns, int64_t *ahead_ns);

#endif
