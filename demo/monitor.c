/*
 * monitor.c - which signals the patient monitor takes, and in what range.
 */
#include "monitor.h"

#include <string.h>

void monitor_channels(const struct signals *signals, struct monitor_channel out[MONITOR_CHANNELS])
{
    const struct monitor_channel channels[MONITOR_CHANNELS] = {
        {"ECG II", "mV", "AgCl electrodes", -5, 5, ECG_HZ, signals->ecg_ii},
        {"ECG V5", "mV", "AgCl electrodes", -5, 5, ECG_HZ, signals->ecg_v5},
        {"ABP", "mm[Hg]", "radial line", -50, 350, PRESSURE_HZ, signals->abp},
        {"PLETH", "%", "finger clip", -10, 10, PRESSURE_HZ, signals->pleth},
        {"RESP", "Ohm", "thoracic impedance", -5, 5, RESP_HZ, signals->resp},
        {"CO2", "mm[Hg]", "sidestream", 0, 100, CO2_HZ, signals->co2},
    };
    memcpy(out, channels, sizeof channels);
}
