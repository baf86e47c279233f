/*
 * output.h - the simulated case as files: three recordings, the marks that somebody stamped, and
 * the truth.
 */
#ifndef DEMO_OUTPUT_H
#define DEMO_OUTPUT_H

#include "signals.h"

/* Theatre time 0 and where the other two devices begin. */
#define THEATRE_START "2031-05-20T08:55:00"
static const double skin_start_s = 37.25, head_start_s = 52.5;

MUST_CHECK int recordings_write(const struct signals *signals, const char *folder, struct err *err);
MUST_CHECK int marks_write(const struct signals *signals, const char *folder, struct err *err);
MUST_CHECK int truth_write(struct signals *signals, const char *folder, struct err *err);

#endif
