/*
 * live_stream_impl.h - what a live stream is made of. For live_*.c and tests alone.
 *
 * Three threads meet here. The reader's thread owns the intake: it lays blocks into parts and
 * records, and never waits for a disk. The writer's thread owns the files. The caller's thread
 * looks. What they share is guarded by one lock, held for copies and look-ups only; samples of a
 * part for the screen have a lock of their own (trace/growing.h).
 */
#ifndef CASE_LIVE_STREAM_IMPL_H
#define CASE_LIVE_STREAM_IMPL_H

#include <pthread.h>

#include "case/live_layout.h"
#include "case/live_own_clock.h"
#include "case/live_stream.h"
#include "recording/edf_readback.h"
#include "timeline/arrival.h"
#include "trace/growing.h"

/* ---- a part: one file, its traces, its clock ---- */

struct part {
    struct live_stream *stream;
    struct live_layout layout; /* never changed once the part is made */
    struct growing *growing;
    int64_t start_civil_ns;

    /* guarded by the stream's lock */
    int number; /* in the file's name */
    char *path;
    bool closed;
    struct arrival_fit fit;     /* of the present stretch */
    int64_t stretch_ns;         /* its onset, recording time */
    struct clock_piece *pieces; /* of the stretches before */
    size_t piece_count, piece_room;
    struct edf_readback *readback; /* NULL until the file is there */

    /* the writer's */
    struct edf_writer *writer;
    bool unsynced;

    /* the caller's: what its traces were last laid by */
    struct clock_piece *laid;
    size_t laid_count, laid_room;
    int64_t laid_boottime_ns;
    bool settled; /* closed, and laid for the last time */
};

MUST_CHECK int part_new(struct live_stream *stream, const struct live_layout *layout,
                        int64_t start_civil_ns, struct part **out, struct err *err);
void part_free(struct part *part);

/* The caller of the next four holds the lock. */

/* A stretch begins at onset_ns; the fit of the one before becomes a piece. */
MUST_CHECK int part_stretch(struct part *part, int64_t onset_ns, struct err *err);
/* On boottimes: the stretches before, then the present one as fitted now, if it is. `room` is
 * made as needed. */
MUST_CHECK int part_pieces(const struct part *part, int64_t case_minus_boottime_ns,
                           struct clock_piece **pieces, size_t *room, size_t *count,
                           struct err *err);
/* When, by the present stretch's fit, recording time own_ns was. */
int64_t part_boottime(const struct part *part, int64_t own_ns);
/* Names the file after its number. */
MUST_CHECK int part_name(struct part *part, struct err *err);

/* Lays the traces on case time, by a new fit when the last is a second old. */
MUST_CHECK int part_refresh(struct part *part, struct err *err);

/* ---- the queue from the reader to the writer ---- */

struct live_record {
    struct live_record *next;
    struct part *part;
    int64_t number, onset_ns; /* its first record in the file */
    int64_t count;            /* records; more than one only of missing samples */
    bool closes;              /* no record: the part is complete */
    bool missing;             /* all samples are: they were dropped */
    size_t bytes;
    float samples[]; /* channel after channel; none when missing */
};

enum { LIVE_QUEUE_BYTES = 512 * 1024 * 1024 };

/* Guarded. A record leaves it only once it is written. */
struct live_queue {
    struct live_record *head, *tail;
    size_t bytes, most_bytes;
    int64_t waiting_ns;
};

/* Copies one record into the queue; when there is no room it is dropped, and stands in the file
 * as missing. *dropped says so. The caller does not hold the lock. */
MUST_CHECK int live_queue_put(struct live_stream *stream, struct part *part, int64_t number,
                              int64_t onset_ns, const float *samples, bool *dropped,
                              struct err *err);
MUST_CHECK int live_queue_close(struct live_stream *stream, struct part *part, struct err *err);
/* Frees the head; the caller holds the lock. */
void live_queue_pop(struct live_queue *queue);

/* ---- the intake: blocks into parts ---- */

struct held_block {
    int64_t own_ns, boottime_ns;
};

struct live_intake {
    struct live_stream *stream;
    bool has_layout;
    struct live_layout layout; /* of the header; ranges as wide as they had to be so far */
    struct part *part;         /* NULL before the first block, and after a change of header */
    int64_t boottime_ns;       /* of the read that is being fed */

    /* Blocks of channels whose range must be learnt first. */
    struct held_block *held;
    float *held_samples;
    size_t held_count, held_most;

    /* The stretch. */
    bool broken;          /* the connection was lost: a new one begins */
    bool fresh;           /* blocks came since the last flush */
    int64_t stretch_ns;   /* onset, recording time */
    int64_t stretch_done; /* records that are full */
    struct own_clock own;

    /* The record that is filling. */
    float *record;
    size_t *filled, *shown, *taken; /* of each channel, and of a block */
    int64_t records;                /* of the part, full ones */

    int64_t samples, garbled, dropped, gaps; /* shared at each flush */
    int64_t garbled_by_parser;
};

/* The sink to feed. Before each feed live_intake_read() says when its bytes came; after it
 * live_intake_flush() shows what came. */
struct stream_sink live_intake_sink(struct live_intake *intake);
void live_intake_read(struct live_intake *intake, int64_t boottime_ns);
MUST_CHECK int live_intake_flush(struct live_intake *intake, struct err *err);
/* The connection was lost. */
MUST_CHECK int live_intake_break(struct live_intake *intake, struct err *err);
/* Nothing more will come: pads the last record and closes the part. */
MUST_CHECK int live_intake_end(struct live_intake *intake, struct err *err);
void live_intake_free(struct live_intake *intake);

/* For live_intake.c, in live_stretch.c. From the start of the stretch to just after the last
 * sample; a period of the fastest channel; when the first sample of a block was taken, at the
 * latest, whose last one came at came_ns. */
int64_t intake_counted_ns(const struct live_intake *intake);
int64_t intake_period_ns(const struct live_layout *layout);
int64_t intake_first_sample_ns(const struct live_layout *layout, int64_t came_ns);

/* Shows what the open record has and the screen has not. */
MUST_CHECK int intake_show(struct live_intake *intake, struct err *err);
/* The newest sample had arrived at boottime_ns. */
void intake_arrive(struct live_intake *intake, int64_t boottime_ns);
MUST_CHECK int intake_put_block(struct live_intake *intake, const float *samples, struct err *err);

/* The next stretch of the part, ahead_ns after the end of this one by the stream's own time, or
 * (NS_NONE) as much later as its first sample came by the laptop's. */
MUST_CHECK int intake_next_stretch(struct live_intake *intake, int64_t ahead_ns,
                                   int64_t boottime_ns, struct err *err);
/* A part whose first sample was taken at first_ns and came at boottime_ns. */
MUST_CHECK int intake_begin_part(struct live_intake *intake, int64_t first_ns, int64_t boottime_ns,
                                 struct err *err);
/* Pads its last record and hands it to the writer to be closed; nothing when there is none. */
MUST_CHECK int intake_end_part(struct live_intake *intake, struct err *err);

/* ---- the stream ---- */

struct live_stream {
    char *folder, *stem, *subject;
    int64_t case_minus_boottime_ns, civil_minus_boottime_ns;

    pthread_mutex_t lock;
    pthread_cond_t changed; /* on CLOCK_MONOTONIC */

    /* guarded */
    struct part **parts;
    size_t part_count, part_room;
    struct live_queue queue;
    struct live_status status; /* all but what is computed when asked */
    int next_number;
    bool ending;  /* the writer ends when the queue is empty */
    bool give_up; /* ... or now */
    bool written; /* the writer has ended */

    struct live_intake intake; /* the reader's */

    pthread_t writer;
    bool writing;               /* the thread is to be joined */
    struct live_reader *reader; /* NULL when fed by hand */
    bool stopped;

    /* the caller's */
    struct trace **traces;
    size_t trace_count, trace_room, traced_parts;
    char *asked_path;
    struct clock_piece *asked_pieces;
    size_t asked_room;
};

int64_t live_boottime_ns(void);

/* A stream that is fed by hand, with its writer running. */
MUST_CHECK int live_stream_new(const struct live_stream_config *config, struct live_stream **out,
                               struct err *err);

/* The writer's thread. */
void *live_writer_run(void *stream);

/* Ends and frees the reader's thread; live_reader.c sets them. */
struct live_reader {
    void (*stop)(struct live_reader *reader);
    void (*free)(struct live_reader *reader);
};

#endif
