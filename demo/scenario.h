/*
 * scenario.h - the invented operation: what happens when, and how the body's set points answer.
 *
 * A keyhole gallbladder removal of subject S-204, who does not exist. Times are theatre time:
 * seconds since the monitor was switched on. Moments scale with the length of the case; how long a
 * body takes to answer does not.
 */
#ifndef DEMO_SCENARIO_H
#define DEMO_SCENARIO_H

#include <stdbool.h>
#include <stddef.h>

enum { SCENARIO_MAX = 64 };

struct happening {
    const char *code; /* of the default codebook */
    double at_s, span_s;
    const char *value, *unit, *note; /* as the mark's cells; "" = none */
    bool stamped;                    /* somebody marked it */
};

struct scenario {
    double length_s;
    struct happening list[SCENARIO_MAX]; /* shape (count), in time order */
    size_t count;
    double gap_at_s, gap_span_s;     /* the monitor records nothing */
    double lead_off_s, lead_on_s;    /* V5 */
    double flush_s, flush_end_s;     /* arterial line */
    double suppressed_s, awakened_s; /* the stretch of burst suppression */
    double induction_s, awake_s;     /* propofol given; eyes open */
    double apnoea_s, ventilated_s, extubation_s;
};

void scenario_init(struct scenario *scenario, double length_s);

/* The first one of a code; NULL when it never happens. */
const struct happening *scenario_find(const struct scenario *scenario, const char *code);
/* Whether one of these (spans) is on. */
bool scenario_during(const struct scenario *scenario, const char *code, double t_s);

double scenario_depth(const struct scenario *scenario, double t_s);   /* 0 awake .. 1 deep */
double scenario_arousal(const struct scenario *scenario, double t_s); /* 0 calm .. about 1 */
double scenario_rate_bpm(const struct scenario *scenario, double t_s);
double scenario_pressure_mmhg(const struct scenario *scenario, double t_s); /* mean arterial */

#endif
