/*
 * memory_recording.h - a recording whose samples are arrays of a test: no file, no reader.
 */
#ifndef TESTS_MEMORY_RECORDING_H
#define TESTS_MEMORY_RECORDING_H

#include <math.h>
#include <stdatomic.h>
#include <string.h>
#include <unistd.h>

#include "recording/reader.h"

enum { MEMORY_CHANNELS = 4 };

struct memory_recording {
    struct recording base;
    struct channel channels[MEMORY_CHANNELS];
    struct run runs[MEMORY_CHANNELS];
    const float *samples[MEMORY_CHANNELS];
    int64_t fail_from;              /* reading at or beyond this sample fails; 0 = never */
    useconds_t slow_us;             /* each call of minmax takes that long at least */
    _Atomic int64_t calls, longest; /* of minmax; samples of the longest */
};

static int memory_recording_read(const struct recording *recording, size_t channel, int64_t first,
                                 int64_t count, float *out, struct err *err)
{
    const struct memory_recording *self = (const struct memory_recording *)(const void *)recording;
    if (self->fail_from && first + count > self->fail_from)
        return err_set(err, ERR_IO, "test.edf: byte 1234: cannot be read");
    memcpy(out, self->samples[channel] + first, (size_t)count * sizeof *out);
    return ERR_OK;
}

/* The plain scan that everything is compared with. */
static void scan(const float *samples, int64_t count, float *low, float *high)
{
    *low = *high = NAN;
    for (int64_t i = 0; i < count; i++) {
        if (isnan(samples[i]))
            continue;
        if (isnan(*low) || samples[i] < *low)
            *low = samples[i];
        if (isnan(*high) || samples[i] > *high)
            *high = samples[i];
    }
}

static int memory_recording_minmax(const struct recording *recording, size_t channel, int64_t first,
                                   int64_t count, float *low, float *high, struct err *err)
{
    struct memory_recording *self = (struct memory_recording *)(uintptr_t)recording;
    if (self->fail_from && first + count > self->fail_from)
        return err_set(err, ERR_IO, "test.edf: byte 1234: cannot be read");
    if (self->slow_us)
        (void)usleep(self->slow_us);
    atomic_fetch_add(&self->calls, 1);
    if (count > atomic_load(&self->longest))
        atomic_store(&self->longest, count);
    scan(self->samples[channel] + first, count, low, high);
    return ERR_OK;
}

static const struct recording_ops memory_recording_ops = {memory_recording_read,
                                                          memory_recording_minmax, NULL};

/* Channel i is samples[i], counts[i] of them. */
static void memory_recording_init(struct memory_recording *self, size_t channels,
                                  const float *const *samples, const int64_t *counts)
{
    memset(self, 0, sizeof *self);
    self->base.ops = &memory_recording_ops;
    self->base.channels = self->channels;
    self->base.info.channels = self->channels;
    self->base.info.channel_count = channels;
    for (size_t i = 0; i < channels; i++) {
        self->runs[i] = (struct run){0, (counts[i] + 1) * NS_PER_MS, 0, counts[i]};
        self->samples[i] = samples[i];
        self->channels[i] = (struct channel){.label = "test",
                                             .unit = "mV",
                                             .rate_hz = 1000,
                                             .samples = counts[i],
                                             .runs = &self->runs[i],
                                             .run_count = counts[i] > 0};
    }
}

#endif
