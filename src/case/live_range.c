/*
 * live_range.c - which physical range a live channel is written with, in 24 bits. Decides by unit
 * and role, by what was declared, or by the first samples; nothing is clipped: a value outside
 * asks for a wider range.
 */
#include <math.h>
#include <string.h>

#include "case/live_layout.h"

enum { DIGITAL_LOW = -8388608, DIGITAL_HIGH = 8388607, FIRST_TIMES = 64, WIDER_TIMES = 16 };

/* What 8 characters of a header can say to either side of zero. */
#define WIDEST 9999999.0
/* A range narrower than this would lose its digits in 8 characters. */
#define NARROWEST 0.001

/* Generous: an amplifier's rails, a transducer at zeroing, a monitor's nonsense values. */
static const struct {
    const char *unit;
    double low, high;
    bool electric; /* for roles that amplifiers have: as a mere unit it could mean anything */
} ranges[] = {
    {"mV", -20, 20, true},       {"uV", -20000, 20000, true}, {"mm[Hg]", -400, 800, false},
    {"mmHg", -400, 800, false},  {"kPa", -60, 120, false},    {"cm[H2O]", -400, 800, false},
    {"cmH2O", -400, 800, false}, {"uS", -10, 200, false},     {"%", -200, 400, false},
    {"Cel", -50, 150, false},    {"degC", -50, 150, false},   {"1/min", -200, 2000, false},
    {"/min", -200, 2000, false}, {"bpm", -200, 2000, false},  {"L/min", -500, 500, false},
    {"l/min", -500, 500, false},
};

static bool by_unit(struct live_channel *channel)
{
    bool electric =
        channel->role == ROLE_ECG || channel->role == ROLE_EEG || channel->role == ROLE_EMG;
    for (size_t i = 0; i < sizeof ranges / sizeof *ranges; i++) {
        if (strcmp(ranges[i].unit, channel->file_unit) == 0 && (electric || !ranges[i].electric)) {
            channel->low = ranges[i].low;
            channel->high = ranges[i].high;
            return true;
        }
    }
    return false;
}

/* A header says exactly this number. */
static bool writable(double value)
{
    return fabs(edf_number(value) - value) <= 1e-12 * fabs(value);
}

/* The declared range grown by whole multiples of itself at both ends: the step stays exactly the
 * same. false when that cannot be written. */
static bool grow_declared(struct live_channel *channel, int64_t below, int64_t above)
{
    double span = channel->physical_max - channel->physical_min;
    int64_t steps = (int64_t)channel->digital_max - channel->digital_min;
    double low = channel->physical_min - (double)below * span;
    double high = channel->physical_max + (double)above * span;
    int64_t digital_low = channel->digital_min - below * steps;
    int64_t digital_high = channel->digital_max + above * steps;
    if (digital_low < DIGITAL_LOW || digital_high > DIGITAL_HIGH || !writable(low) ||
        !writable(high))
        return false;
    channel->low = edf_number(low);
    channel->high = edf_number(high);
    channel->digital_low = (int)digital_low;
    channel->digital_high = (int)digital_high;
    return true;
}

static bool has_declared(const struct live_channel *channel)
{
    return channel->digital_max > channel->digital_min &&
           channel->physical_min != channel->physical_max;
}

/* 1, 2 or 5 times a power of ten, at least `value`. */
static double round_up(double value)
{
    double ten = pow(10, floor(log10(value)));
    for (int i = 0; i < 3; i++) {
        static const double steps[] = {1, 2, 5};
        if (steps[i] * ten >= value)
            return steps[i] * ten;
    }
    return 10 * ten;
}

void live_layout_set_range(struct live_channel *channel, double widest)
{
    channel->digital_low = DIGITAL_LOW;
    channel->digital_high = DIGITAL_HIGH;
    if (has_declared(channel)) {
        /* As much again below, of which the lowest value means "missing"; a converter that fills
         * 24 bits shares that one value. */
        if (!grow_declared(channel, 1, 0) && !grow_declared(channel, 0, 0)) {
            channel->low = channel->physical_min;
            channel->high = channel->physical_max;
        }
        return;
    }
    if (by_unit(channel))
        return;
    double reach = 0;
    if (widest > 0)
        reach = fmin(fmax(round_up(FIRST_TIMES * widest), NARROWEST), WIDEST);
    channel->low = -reach;
    channel->high = reach;
}

bool live_value_fits_a_file(float value)
{
    return isnan(value) || fabsf(value) < (float)WIDEST;
}

bool live_channel_holds(const struct live_channel *channel, float value)
{
    double low = fmin(channel->low, channel->high), high = fmax(channel->low, channel->high);
    double step = (high - low) / ((double)channel->digital_high - channel->digital_low);
    return isnan(value) || ((double)value >= low - step / 2 && (double)value <= high + step / 2);
}

void live_layout_widen(struct live_channel *channel, double value)
{
    double half = fabs(channel->high - channel->low) / 2;
    double middle = (channel->high + channel->low) / 2;
    if (has_declared(channel) && grow_declared(channel, WIDER_TIMES, WIDER_TIMES) &&
        live_channel_holds(channel, (float)value))
        return;
    while (fabs(value - middle) > half && half < 2 * WIDEST)
        half *= WIDER_TIMES;
    channel->low = edf_number(fmax(middle - half, -WIDEST));
    channel->high = edf_number(fmin(middle + half, WIDEST));
    channel->digital_low = DIGITAL_LOW;
    channel->digital_high = DIGITAL_HIGH;
}

bool live_layout_ranged(const struct live_layout *layout)
{
    for (size_t i = 0; i < layout->channel_count; i++) {
        if (layout->channels[i].low == layout->channels[i].high)
            return false;
    }
    return true;
}
