/*
 * fuzz_csv.c - CSV from hostile bytes, with a time column and with a rate.
 */
#include <stdint.h>
#include <stdlib.h>

#include "recording/recording.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

static void read_all(const struct recording *recording)
{
    const struct recording_info *info = recording_info(recording);
    for (size_t i = 0; i < info->channel_count; i++) {
        const struct channel *channel = &info->channels[i];
        float values[64], low, high;
        int64_t count = channel->samples < 64 ? channel->samples : 64;
        if (recording_read(recording, i, channel->samples - count, count, values, NULL) ||
            recording_minmax(recording, i, 0, count, &low, &high, NULL))
            abort();
        for (size_t k = 1; k < channel->run_count; k++) {
            if (channel->runs[k].start_ns < run_end_ns(&channel->runs[k - 1]))
                abort();
        }
    }
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    for (int with_rate = 0; with_rate < 2; with_rate++) {
        struct memory_file files[] = {{"a.csv", data, size}};
        struct memory_files space;
        struct recording *recording = NULL;
        memory_files_init(&space, files, 1);
        struct reader_options options = {.files = &space.space, .rate_hz = with_rate ? 10 : 0};
        if (recording_open("a.csv", &options, &recording, NULL) == 0) {
            read_all(recording);
            recording_close(recording);
        }
    }
    return 0;
}
