/*
 * fuzz_edf.c - EDF, EDF+, BDF and BDF+ from hostile bytes: whatever opens can be read whole, and
 * its extremes are those of its samples.
 */
#include <math.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include "recording/recording.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

static void read_channel(const struct recording *recording, size_t channel, int64_t samples)
{
    float values[512], low, high, least = INFINITY, greatest = -INFINITY;
    int64_t count = samples < 512 ? samples : 512;
    if (recording_read(recording, channel, samples - count, count, values, NULL) ||
        recording_minmax(recording, channel, samples - count, count, &low, &high, NULL))
        abort();
    for (int64_t i = 0; i < count; i++) {
        least = fminf(least, values[i]);
        greatest = fmaxf(greatest, values[i]);
    }
    if (count > 0 && isfinite(least) && isfinite(greatest) && (low != least || high != greatest))
        abort();
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    struct memory_file files[] = {{"a.edf", data, size}};
    struct memory_files space;
    struct recording *recording = NULL;
    memory_files_init(&space, files, 1);
    struct reader_options options = {.files = &space.space};
    if (recording_open("a.edf", &options, &recording, NULL) == 0) {
        const struct recording_info *info = recording_info(recording);
        for (size_t i = 0; i < info->channel_count; i++)
            read_channel(recording, i, info->channels[i].samples);
        recording_close(recording);
    }
    return 0;
}
