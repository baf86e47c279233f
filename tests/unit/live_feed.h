/*
 * live_feed.h - a live stream fed by hand, at times that a test makes up, into a folder of its own.
 */
#ifndef TESTS_LIVE_FEED_H
#define TESTS_LIVE_FEED_H

#include "case/live_stream_impl.h"
#include "recording/recording.h"

enum { FEED_CHANNELS_MOST = 4 };

struct feed {
    struct live_stream *stream;
    struct stream_sink sink;
    const struct stream_header *header; /* of the blocks that are fed now */
    int64_t blocks;                     /* fed so far */
    int64_t came_ns;                    /* boottime of the next block, moved on by each */
};

extern char feed_folder[];

/* Init and fini of a suite. */
void feed_set_up(void);
void feed_tear_down(void);

/* Case time is boottime less 1000 s; the clock on the wall stands at 2031-05-20T08:55:00 at
 * boottime 1000 s, when the first block comes. */
enum { FEED_START_S = 1000 };
struct feed feed_start(void);
void feed_header(struct feed *feed, const struct stream_header *header);

/* One block, read alone. Sample k of channel c is feed_value(c, k) counted from the first block. */
void feed_block(struct feed *feed, int64_t own_ns);
void feed_blocks(struct feed *feed, int64_t count);
void feed_values(struct feed *feed, int64_t own_ns, const float *samples);
float feed_value(size_t channel, int64_t k);
void feed_break(struct feed *feed, int64_t for_ns);
void feed_stop(struct feed *feed);

struct live_status feed_status(struct feed *feed);
/* Polls until nothing waits for the disk. */
void feed_wait_written(struct feed *feed);

/* "FOLDER/case-live-NUMBER.bdf", and the file opened. */
const char *feed_path(int number);
struct recording *feed_open(int number);

/* All traces as they stand now. */
struct trace *feed_trace(struct feed *feed, size_t index, size_t *count);

/* Samples [first, first + count) of a trace and of a file's channel are the same, NaN too. */
void feed_expect_same(const struct trace *trace, const struct recording *recording, size_t channel,
                      double step);

#endif
