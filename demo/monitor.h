/*
 * monitor.h - the patient monitor's channels, as it records and as it sends them.
 */
#ifndef DEMO_MONITOR_H
#define DEMO_MONITOR_H

#include "signals.h"

enum { MONITOR_CHANNELS = 6 };

struct monitor_channel {
    const char *label, *unit, *transducer;
    double physical_min, physical_max;
    int rate_hz;
    const float *samples; /* from theatre time 0; owned by the signals */
};

void monitor_channels(const struct signals *signals, struct monitor_channel out[MONITOR_CHANNELS]);

#endif
