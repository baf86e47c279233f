/*
 * fuzz_wfdb.c - a WFDB record from hostile bytes. The input is cut at the first NUL byte into a
 * header, and at the second into signals and annotations.
 */
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include "recording/recording.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

static void read_all(const struct recording *recording)
{
    const struct recording_info *info = recording_info(recording);
    for (size_t i = 0; i < info->channel_count; i++) {
        float values[256], low, high;
        int64_t samples = info->channels[i].samples;
        int64_t count = samples < 256 ? samples : 256;
        if (recording_read(recording, i, samples - count, count, values, NULL) ||
            recording_minmax(recording, i, 0, count, &low, &high, NULL))
            abort();
    }
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    const uint8_t *first = size ? memchr(data, 0, size) : NULL;
    size_t header = first ? (size_t)(first - data) : size;
    const uint8_t *rest = first ? first + 1 : data + size;
    size_t left = size - (size_t)(rest - data);
    struct memory_file files[] = {{"r.hea", data, header},
                                  {"r.dat", rest, left / 2},
                                  {"s.hea", data, header},
                                  {"r.atr", rest + left / 2, left - left / 2}};
    struct memory_files space;
    struct recording *recording = NULL;
    memory_files_init(&space, files, 4);
    struct reader_options options = {.files = &space.space};
    if (recording_open("r.hea", &options, &recording, NULL) == 0) {
        read_all(recording);
        recording_close(recording);
    }
    return 0;
}
