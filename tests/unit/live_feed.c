/*
 * live_feed.c - feeding a live stream by hand.
 */
#include "live_feed.h"

#include <criterion/criterion.h>

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

char feed_folder[] = "/tmp/incisura-stream-XXXXXX";

void feed_set_up(void)
{
    cr_assert_not_null(mkdtemp(feed_folder));
}

void feed_tear_down(void)
{
    char command[128];
    (void)snprintf(command, sizeof command, "rm -rf %s", feed_folder);
    cr_expect_eq(system(command), 0);
}

struct feed feed_start(void)
{
    struct civil civil = {2031, 5, 20, 8, 55, 0, 0};
    struct live_stream_config config = {
        .source = "by hand",
        .folder = feed_folder,
        .stem = "case",
        .subject = "S 7",
        .case_minus_boottime_ns = -FEED_START_S * NS_PER_S,
        .civil_minus_boottime_ns = civil_to_ns(&civil) - FEED_START_S * NS_PER_S,
    };
    struct feed feed = {.came_ns = FEED_START_S * NS_PER_S};
    struct err err = {0};
    cr_assert_eq(live_stream_new(&config, &feed.stream, &err), 0, "%s", err.text);
    feed.sink = live_intake_sink(&feed.stream->intake);
    return feed;
}

void feed_header(struct feed *feed, const struct stream_header *header)
{
    struct err err = {0};
    feed->header = header;
    cr_assert_eq(feed->sink.header(feed->sink.context, header, &err), 0, "%s", err.text);
}

float feed_value(size_t channel, int64_t k)
{
    if ((k + (int64_t)channel) % 37 == 20)
        return NAN;
    return channel == 0 ? 2 * sinf(0.02f * (float)k) : 30 + (float)((k * 7) % 100) / 50;
}

void feed_values(struct feed *feed, int64_t own_ns, const float *samples)
{
    struct err err = {0};
    live_intake_read(&feed->stream->intake, feed->came_ns);
    cr_assert_eq(feed->sink.block(feed->sink.context, own_ns, samples, &err), 0, "%s", err.text);
    cr_assert_eq(live_intake_flush(&feed->stream->intake, &err), 0, "%s", err.text);
    feed->blocks++;
    feed->came_ns += feed->header->block_ns / feed->header->blocks;
}

void feed_block(struct feed *feed, int64_t own_ns)
{
    static float samples[4096];
    float *to = samples;
    for (size_t i = 0; i < feed->header->channel_count; i++) {
        int count = feed->header->channels[i].samples;
        for (int k = 0; k < count; k++)
            *to++ = feed_value(i, feed->blocks * count + k);
    }
    feed_values(feed, own_ns, samples);
}

void feed_blocks(struct feed *feed, int64_t count)
{
    for (int64_t i = 0; i < count; i++)
        feed_block(feed, NS_NONE);
}

void feed_break(struct feed *feed, int64_t for_ns)
{
    struct err err = {0};
    cr_assert_eq(live_intake_break(&feed->stream->intake, &err), 0, "%s", err.text);
    feed->came_ns += for_ns;
}

void feed_stop(struct feed *feed)
{
    struct err err = {0};
    cr_assert_eq(live_stream_stop(feed->stream, 30000, &err), 0, "%s", err.text);
}

struct live_status feed_status(struct feed *feed)
{
    struct live_status status;
    live_stream_status(feed->stream, &status);
    return status;
}

void feed_wait_written(struct feed *feed)
{
    for (int i = 0; i < 3000; i++) {
        if (feed_status(feed).waiting_ns == 0)
            return;
        (void)nanosleep(&(struct timespec){0, 10000000}, NULL);
    }
    cr_assert_fail("still waits: %s", feed_status(feed).trouble);
}

const char *feed_path(int number)
{
    static char path[96];
    (void)snprintf(path, sizeof path, "%s/case-live-%d.bdf", feed_folder, number);
    return path;
}

struct recording *feed_open(int number)
{
    static const struct reader_options none = {0};
    struct recording *recording = NULL;
    struct err err = {0};
    cr_assert_eq(recording_open(feed_path(number), &none, &recording, &err), 0, "%s", err.text);
    return recording;
}

struct trace *feed_trace(struct feed *feed, size_t index, size_t *count)
{
    struct trace *const *traces = NULL;
    size_t there = 0;
    struct err err = {0};
    cr_assert_eq(live_stream_refresh(feed->stream, &traces, &there, &err), 0, "%s", err.text);
    if (count)
        *count = there;
    return index < there ? traces[index] : NULL;
}

void feed_expect_same(const struct trace *trace, const struct recording *recording, size_t channel,
                      double step)
{
    int64_t samples = recording_info(recording)->channels[channel].samples;
    float *shown = malloc((size_t)samples * sizeof *shown + 1);
    float *stored = malloc((size_t)samples * sizeof *stored + 1);
    struct err err = {0};
    cr_assert_eq(trace->samples, samples);
    cr_assert_eq(trace_read(trace, 0, samples, shown, &err), 0, "%s", err.text);
    cr_assert_eq(recording_read(recording, channel, 0, samples, stored, &err), 0, "%s", err.text);
    for (int64_t k = 0; k < samples; k++)
        cr_assert((isnan(shown[k]) && isnan(stored[k])) ||
                      fabs((double)shown[k] - (double)stored[k]) <= step,
                  "sample %lld: %g shown, %g stored", (long long)k, (double)shown[k],
                  (double)stored[k]);
    free(shown);
    free(stored);
}
