/*
 * live_reader.c - the thread that reads the source of a live stream and feeds its intake. Opens it
 * again when it is lost; never waits for a disk.
 */
#include <errno.h>
#include <poll.h>
#include <stdatomic.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/eventfd.h>
#include <unistd.h>

#include "base/array.h"
#include "base/ns.h"
#include "case/live_stream_impl.h"
#include "recording/source.h"

enum {
    READ_BYTES = 65536,
    PAUSE_LEAST_MS = 250,
    PAUSE_MOST_MS = 5000,
    CONNECTING_MS = 20, /* how often a connection under way is looked at */
    WAIT_MS = 1000,
};

struct reader_thread {
    struct live_reader base;
    struct live_stream *stream;
    struct source *source;
    struct stream_parser *parser;
    pthread_t thread;
    bool running;
    int wake_fd;
    atomic_bool stop;
    int pause_ms;
    uint8_t *buffer;
};

static void tell(struct reader_thread *reader, enum live_state state, const char *text)
{
    struct live_status *status = &reader->stream->status;
    (void)pthread_mutex_lock(&reader->stream->lock);
    status->state = state;
    (void)snprintf(status->text, sizeof status->text, "%.159s", text);
    (void)pthread_mutex_unlock(&reader->stream->lock);
}

/* Not after the end of the stream is asked for. */
static void pause_for(struct reader_thread *reader, int ms)
{
    struct pollfd wake = {.fd = reader->wake_fd, .events = POLLIN};
    (void)poll(&wake, 1, ms); /* early or not, the loop looks at `stop` next */
}

/* Tries until it is open; false when the stream is to stop. */
static bool connect_source(struct reader_thread *reader, enum live_state state)
{
    while (!atomic_load(&reader->stop)) {
        struct err err = {0};
        bool open = false;
        int failed = source_open(reader->source, &open, &err);
        if (!failed && open)
            return true;
        tell(reader, state, failed ? err.text : "connecting");
        if (!failed) {
            pause_for(reader, CONNECTING_MS);
            continue;
        }
        source_close(reader->source);
        pause_for(reader, reader->pause_ms);
        reader->pause_ms =
            reader->pause_ms * 2 < PAUSE_MOST_MS ? reader->pause_ms * 2 : PAUSE_MOST_MS;
    }
    return false;
}

static int feed(struct reader_thread *reader, size_t count, struct err *err)
{
    struct live_intake *intake = &reader->stream->intake;
    live_intake_read(intake, live_boottime_ns());
    int failed = stream_parser_feed(reader->parser, reader->buffer, count, err);
    intake->garbled_by_parser = stream_parser_garbled(reader->parser);
    return failed ? failed : live_intake_flush(intake, err);
}

/* Reads until the source is over or broken (*err says why), or the stream is to stop. */
static void read_source(struct reader_thread *reader, struct err *err)
{
    enum source_answer answer = SOURCE_NOTHING;
    int failed = ERR_OK;
    while (!failed && answer != SOURCE_OVER && !atomic_load(&reader->stop)) {
        size_t count = 0;
        failed = source_wait(reader->source, reader->wake_fd, WAIT_MS, err);
        if (!failed)
            failed = source_read(reader->source, reader->buffer, READ_BYTES, &count, &answer, err);
        if (failed || answer != SOURCE_BYTES)
            continue;
        reader->pause_ms = PAUSE_LEAST_MS;
        failed = feed(reader, count, err);
    }
}

static void lose(struct reader_thread *reader)
{
    struct err err = {0};
    source_close(reader->source);
    stream_parser_break(reader->parser);
    reader->stream->intake.garbled_by_parser = stream_parser_garbled(reader->parser);
    if (live_intake_break(&reader->stream->intake, &err))
        tell(reader, LIVE_LOST, err.text);
}

static void *run(void *context)
{
    struct reader_thread *reader = context;
    enum live_state state = LIVE_CONNECTING;
    while (connect_source(reader, state)) {
        struct err err = {0};
        tell(reader, LIVE_RECEIVING, "");
        read_source(reader, &err);
        if (atomic_load(&reader->stop))
            break;
        lose(reader);
        if (!source_returns(reader->source)) {
            tell(reader, LIVE_ENDED, err.code ? err.text : "the input is at its end");
            if (live_intake_end(&reader->stream->intake, &err))
                tell(reader, LIVE_ENDED, err.text);
            break;
        }
        state = LIVE_LOST;
        tell(reader, LIVE_LOST, err.code ? err.text : "the other side closed the connection");
        pause_for(reader, reader->pause_ms);
    }
    return NULL;
}

static void reader_stop(struct live_reader *base)
{
    struct reader_thread *reader = (struct reader_thread *)(void *)base;
    atomic_store(&reader->stop, true);
    (void)!eventfd_write(reader->wake_fd, 1); /* should it fail, the next wait ends in WAIT_MS */
    if (reader->running)
        (void)pthread_join(reader->thread, NULL);
    reader->running = false;
    source_close(reader->source);
}

static void reader_free(struct live_reader *base)
{
    struct reader_thread *reader = (struct reader_thread *)(void *)base;
    source_free(reader->source);
    stream_parser_free(reader->parser);
    if (reader->wake_fd >= 0)
        (void)close(reader->wake_fd);
    free(reader->buffer);
    free(reader);
}

static int start_reader(struct live_stream *stream, struct reader_thread *reader, double rate_hz,
                        struct err *err)
{
    struct stream_sink sink = live_intake_sink(&stream->intake);
    int failed = stream_parser_new(rate_hz, &sink, &reader->parser, err);
    if (failed)
        return failed;
    reader->stream = stream;
    if (pthread_create(&reader->thread, NULL, run, reader) != 0)
        return err_set(err, ERR_MEMORY, "cannot start a thread to read the live stream");
    reader->running = true;
    stream->reader = &reader->base;
    return ERR_OK;
}

static int reader_new(const char *source, struct reader_thread **out, struct err *err)
{
    void *memory = NULL, *buffer = NULL;
    int failed = array_new_zero(&memory, 1, sizeof(struct reader_thread), err);
    if (failed)
        return failed;
    struct reader_thread *made = memory;
    made->base = (struct live_reader){reader_stop, reader_free};
    made->pause_ms = PAUSE_LEAST_MS;
    made->wake_fd = eventfd(0, EFD_CLOEXEC | EFD_NONBLOCK);
    if (made->wake_fd < 0)
        failed = err_errno(err, source, "prepare to read");
    if (!failed)
        failed = array_new(&buffer, READ_BYTES, 1, err);
    made->buffer = buffer;
    if (!failed)
        failed = source_new(source, &made->source, err);
    if (failed)
        reader_free(&made->base);
    else
        *out = made;
    return failed;
}

int live_stream_start(const struct live_stream_config *config, struct live_stream **out,
                      struct err *err)
{
    struct reader_thread *reader = NULL;
    struct live_stream *stream = NULL;
    int failed = reader_new(config->source, &reader, err);
    if (!failed)
        failed = live_stream_new(config, &stream, err);
    if (!failed)
        failed = start_reader(stream, reader, config->rate_hz, err);
    if (failed) {
        live_stream_free(stream);
        if (reader)
            reader_free(&reader->base);
    } else {
        *out = stream;
    }
    return failed;
}
