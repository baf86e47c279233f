/*
 * make_case.c - writes the large recording that the benches measure on: plain BDF, 8 hours, 32
 * channels, 1 kHz (2.7 GB), a triangle wave with noise on every channel.
 *
 *   make_case PATH [HOURS]
 */
#include <errno.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { CHANNELS = 32, RATE_HZ = 1000, RECORD_BYTES = CHANNELS * RATE_HZ * 3 };

static void put_header(FILE *file, int records)
{
    (void)fprintf(file, "\xff%-7s%-80s%-80s%-8s%-8s%-8d%-44s%-8d%-8d%-4d", "BIOSEMI", "X", "bench",
                  "20.05.31", "08.55.00", 256 * (CHANNELS + 1), "24BIT", records, 1, CHANNELS);
    for (int i = 0; i < CHANNELS; i++)
        (void)fprintf(file, "EEG %-12d", i + 1);
    static const struct {
        const char *text;
        int width;
    } fields[] = {{"", 80},       {"uV", 8}, {"-262144", 8}, {"262143", 8}, {"-8388608", 8},
                  {"8388607", 8}, {"", 80},  {"1000", 8},    {"", 32}};
    for (size_t f = 0; f < sizeof fields / sizeof *fields; f++)
        for (int i = 0; i < CHANNELS; i++)
            (void)fprintf(file, "%-*s", fields[f].width, fields[f].text);
}

static void fill(uint8_t *to, uint32_t second, uint32_t *noise)
{
    for (uint32_t channel = 0; channel < CHANNELS; channel++) {
        for (uint32_t i = 0; i < RATE_HZ; i++, to += 3) {
            *noise = *noise * 1664525u + 1013904223u;
            uint32_t at = ((second * RATE_HZ + i) * (channel + 3)) & 0x3fff;
            int32_t value = (int32_t)(at < 0x2000 ? at : 0x4000 - at) * 24 - 98304;
            value += (int32_t)(*noise >> 18);
            to[0] = (uint8_t)value;
            to[1] = (uint8_t)(value >> 8);
            to[2] = (uint8_t)(value >> 16);
        }
    }
}

int main(int argc, char **argv)
{
    static uint8_t record[RECORD_BYTES];
    int hours = argc > 2 ? atoi(argv[2]) : 8;
    FILE *file = argc > 1 && hours > 0 ? fopen(argv[1], "wb") : NULL;
    if (!file) {
        (void)fprintf(stderr, "make_case: cannot write: make_case PATH [HOURS]\n");
        return 2;
    }
    uint32_t noise = 1;
    put_header(file, hours * 3600);
    for (int second = 0; second < hours * 3600; second++) {
        fill(record, (uint32_t)second, &noise);
        if (fwrite(record, 1, sizeof record, file) != sizeof record)
            break;
    }
    if (ferror(file) || fclose(file) != 0) {
        (void)fprintf(stderr, "make_case: %s: %s\n", argv[1], strerror(errno));
        (void)remove(argv[1]);
        return 2;
    }
    return 0;
}
