/*
 * key_reader.c - the thread that stamps what the terminal sends. Understands none of it.
 *
 * Bytes that came together are one arrival. Arrivals are kept in a ring with room for more than the
 * pipe has bytes: what a new one drives out of it has left the pipe. While the pipe is full the
 * thread takes nothing, and the kernel keeps what is typed.
 */
#include "terminal/key_reader.h"

#include <errno.h>
#include <fcntl.h>
#include <poll.h>
#include <pthread.h>
#include <stdlib.h>
#include <sys/eventfd.h>
#include <sys/ioctl.h>
#include <time.h>
#include <unistd.h>

#include "base/array.h"
#include "base/ns.h"

/* TAKEN_AHEAD: bytes that were read out of the pipe and not asked for yet; ncurses keeps fewer. */
enum { PIPE_BYTES = 4096, CHUNK = 256, TAKEN_AHEAD = 512 };

struct arrival {
    uint64_t byte; /* number of its first byte */
    struct key_stamp stamp;
};

struct key_reader {
    int terminal, stop; /* stop: an eventfd, readable when the thread is to end */
    int pipe[2];        /* [1] is the thread's, which closes it when the terminal is gone */
    FILE *stream;       /* owns pipe[0] */
    pthread_t thread;
    bool running;
    pthread_mutex_t lock; /* for what follows, and for the pipe's fill together with `passed` */
    uint64_t passed;      /* bytes written into the pipe */
    struct arrival *ring; /* shape (room): [first, first + count), modulo room, rising in byte */
    size_t room, first, count;
};

static int64_t clock_ns(clockid_t clock)
{
    struct timespec now = {0};
    /* Neither clock can fail on a kernel that has it, and all do. */
    (void)clock_gettime(clock, &now);
    return now.tv_sec * NS_PER_S + now.tv_nsec;
}

struct key_stamp key_stamp_now(void)
{
    int64_t boottime_ns = clock_ns(CLOCK_BOOTTIME);
    return (struct key_stamp){boottime_ns, clock_ns(CLOCK_REALTIME)};
}

/* Waits until `fd` is ready for `what`; its answer, or 0 when the thread is to end. */
static int wait_for(const struct key_reader *reader, int fd, short what)
{
    for (;;) {
        struct pollfd waiting[] = {{fd, what, 0}, {reader->stop, POLLIN, 0}};
        int ready = poll(waiting, 2, -1);
        if (ready < 0 && errno == EINTR)
            continue;
        if (ready < 0 || waiting[1].revents)
            return 0;
        return waiting[0].revents;
    }
}

/* Writes what the pipe takes, at once, so that its fill and `passed` agree under the lock. */
static ssize_t pass_some(struct key_reader *reader, const char *bytes, size_t count,
                         const struct key_stamp *stamp)
{
    (void)pthread_mutex_lock(&reader->lock);
    ssize_t written = write(reader->pipe[1], bytes, count);
    if (written > 0) {
        if (reader->count == reader->room) {
            reader->first = (reader->first + 1) % reader->room;
            reader->count--;
        }
        size_t last = (reader->first + reader->count++) % reader->room;
        reader->ring[last] = (struct arrival){reader->passed, *stamp};
        reader->passed += (uint64_t)written;
    }
    (void)pthread_mutex_unlock(&reader->lock);
    return written;
}

static bool pass_on(struct key_reader *reader, const char *bytes, size_t count,
                    const struct key_stamp *stamp)
{
    while (count > 0) {
        ssize_t written = pass_some(reader, bytes, count, stamp);
        if (written < 0 && errno == EINTR)
            continue;
        if (written < 0 && errno != EAGAIN)
            return false;
        if (written < 0 && !wait_for(reader, reader->pipe[1], POLLOUT))
            return false;
        bytes += written > 0 ? written : 0;
        count -= written > 0 ? (size_t)written : 0;
    }
    return true;
}

static void *run(void *argument)
{
    struct key_reader *reader = argument;
    char bytes[CHUNK];
    int answer;
    while ((answer = wait_for(reader, reader->terminal, POLLIN)) != 0) {
        struct key_stamp stamp = key_stamp_now();
        ssize_t count = read(reader->terminal, bytes, sizeof bytes);
        if (count > 0 && !pass_on(reader, bytes, (size_t)count, &stamp))
            break;
        /* A terminal that hung up stays ready, with nothing to read. */
        if (count <= 0 && answer & ~POLLIN)
            break;
    }
    (void)close(reader->pipe[1]); /* tells the other end */
    reader->pipe[1] = -1;
    return NULL;
}

/* An open file description of its own: reading must not wait, and whoever else has the terminal
 * open must not notice. */
static int open_terminal(bool from_tty, int *out, struct err *err)
{
    const char *name = from_tty ? "/dev/tty" : ttyname(STDIN_FILENO);
    int fd = name ? open(name, O_RDONLY | O_NONBLOCK | O_NOCTTY | O_CLOEXEC) : -1;
    /* In a container the name may not be there; the thread only reads what poll announces. */
    if (fd < 0 && !from_tty && isatty(STDIN_FILENO))
        fd = fcntl(STDIN_FILENO, F_DUPFD_CLOEXEC, 3);
    if (fd < 0)
        return err_set(err, ERR_USAGE, "needs a terminal to read keys from");
    *out = fd;
    return ERR_OK;
}

static int make_pipe(struct key_reader *reader, struct err *err)
{
    if (pipe2(reader->pipe, O_CLOEXEC) < 0)
        return err_errno(err, "a pipe", "open");
    int flags = fcntl(reader->pipe[1], F_GETFL);
    if (flags < 0 || fcntl(reader->pipe[1], F_SETFL, flags | O_NONBLOCK) < 0)
        return err_errno(err, "a pipe", "set up");
    /* Small is enough for keys; what it really holds is asked for. */
    (void)fcntl(reader->pipe[1], F_SETPIPE_SZ, PIPE_BYTES);
    int holds = fcntl(reader->pipe[1], F_GETPIPE_SZ);
    if (holds < 0)
        return err_errno(err, "a pipe", "set up");
    reader->room = (size_t)holds + TAKEN_AHEAD;
    int failed = array_new((void **)&reader->ring, reader->room, sizeof *reader->ring, err);
    if (failed)
        return failed;
    reader->stream = fdopen(reader->pipe[0], "r");
    return reader->stream ? ERR_OK : err_memory(err, "the terminal");
}

static int set_up(struct key_reader *reader, bool from_tty, struct err *err)
{
    int failed = open_terminal(from_tty, &reader->terminal, err);
    if (!failed)
        failed = make_pipe(reader, err);
    if (failed)
        return failed;
    reader->stop = eventfd(0, EFD_CLOEXEC);
    if (reader->stop < 0)
        return err_errno(err, "an eventfd", "open");
    int code = pthread_create(&reader->thread, NULL, run, reader);
    if (code != 0) {
        errno = code;
        return err_errno(err, "the key thread", "start");
    }
    reader->running = true;
    return ERR_OK;
}

int key_reader_start(bool from_tty, struct key_reader **out, struct err *err)
{
    struct key_reader *made = calloc(1, sizeof *made);
    if (!made)
        return err_memory(err, "the terminal");
    made->terminal = made->stop = made->pipe[0] = made->pipe[1] = -1;
    (void)pthread_mutex_init(&made->lock, NULL); /* a plain one cannot fail */
    int failed = set_up(made, from_tty, err);
    if (failed)
        key_reader_stop(made);
    else
        *out = made;
    return failed;
}

static void close_open(int fd)
{
    if (fd >= 0)
        (void)close(fd);
}

void key_reader_stop(struct key_reader *reader)
{
    if (!reader)
        return;
    if (reader->running) {
        /* An eventfd that holds nothing takes a one. */
        (void)eventfd_write(reader->stop, 1);
        (void)pthread_join(reader->thread, NULL);
    }
    if (reader->stream)
        (void)fclose(reader->stream); /* was only read from */
    else
        close_open(reader->pipe[0]);
    close_open(reader->pipe[1]);
    close_open(reader->stop);
    close_open(reader->terminal);
    (void)pthread_mutex_destroy(&reader->lock);
    free(reader->ring);
    free(reader);
}

FILE *key_reader_stream(const struct key_reader *reader)
{
    return reader->stream;
}

uint64_t key_reader_taken(struct key_reader *reader)
{
    int waiting = 0;
    (void)pthread_mutex_lock(&reader->lock);
    /* A pipe that is open can say what it holds. */
    (void)ioctl(reader->pipe[0], FIONREAD, &waiting);
    uint64_t taken = reader->passed - (uint64_t)waiting;
    (void)pthread_mutex_unlock(&reader->lock);
    return taken;
}

struct key_stamp key_reader_stamp(struct key_reader *reader, uint64_t byte)
{
    (void)pthread_mutex_lock(&reader->lock);
    bool known = byte < reader->passed && reader->count > 0;
    while (reader->count > 1 && reader->ring[(reader->first + 1) % reader->room].byte <= byte) {
        reader->first = (reader->first + 1) % reader->room;
        reader->count--;
    }
    struct key_stamp stamp = known ? reader->ring[reader->first].stamp : key_stamp_now();
    (void)pthread_mutex_unlock(&reader->lock);
    return stamp;
}
