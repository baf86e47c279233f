/*
 * source.c - naming a source, reading from it, waiting for it. Opening is in source_open.c.
 */
#include <errno.h>
#include <poll.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "base/str.h"
#include "recording/source_impl.h"

enum { LOOK_AGAIN_MS = 50 };

/* ---- naming ---- */

static int refuse(const char *text, const char *why, struct err *err)
{
    return err_set(err, ERR_USAGE,
                   "source '%.100s': %s; write fifo:PATH, serial:DEVICE@BAUD, tcp:HOST:PORT, - or "
                   "a file",
                   text, why);
}

static int name_serial(struct source *source, const char *rest, struct err *err)
{
    const char *at = strrchr(rest, '@');
    int64_t baud = 0;
    if (!at || at == rest || !integer_parse(at + 1, &baud) || baud <= 0 || baud > 4000000)
        return refuse(source->text, "a serial line needs its rate: serial:/dev/ttyUSB0@115200",
                      err);
    source->baud = (int)baud;
    if (!baud_known(source->baud))
        return refuse(source->text, "not a rate that serial lines have", err);
    source->name = strndup(rest, (size_t)(at - rest));
    return source->name ? ERR_OK : err_memory(err, source->text);
}

/* From 1 to 65535, of digits alone: the system is given the text. */
static bool is_port(const char *text)
{
    int64_t port = 0;
    return strspn(text, "0123456789") == strlen(text) && integer_parse(text, &port) && port >= 1 &&
           port <= 65535;
}

/* HOST:PORT, [HOST]:PORT where the host has colons itself. */
static int name_tcp(struct source *source, const char *rest, struct err *err)
{
    const char *colon = strrchr(rest, ':');
    if (!colon || colon == rest || !is_port(colon + 1))
        return refuse(source->text, "a TCP source needs a host and a port from 1 to 65535", err);
    size_t length = (size_t)(colon - rest);
    if (rest[0] == '[' && length > 2 && rest[length - 1] == ']') {
        rest++;
        length -= 2;
    } else if (memchr(rest, ':', length) || rest[0] == '[') {
        return refuse(source->text, "a host with colons goes in brackets: tcp:[::1]:4000", err);
    }
    source->name = strndup(rest, length);
    source->port = strdup(colon + 1);
    return source->name && source->port ? ERR_OK : err_memory(err, source->text);
}

static int name(struct source *source, struct err *err)
{
    static const struct {
        const char *prefix;
        enum source_kind kind;
    } kinds[] = {{"fifo:", SOURCE_FIFO}, {"serial:", SOURCE_SERIAL}, {"tcp:", SOURCE_TCP}};
    const char *rest = source->text;
    source->kind = strcmp(rest, "-") == 0 ? SOURCE_STDIN : SOURCE_FILE;
    for (size_t i = 0; i < sizeof kinds / sizeof *kinds; i++) {
        if (strncmp(source->text, kinds[i].prefix, strlen(kinds[i].prefix)) == 0) {
            source->kind = kinds[i].kind;
            rest += strlen(kinds[i].prefix);
        }
    }
    if (!*rest)
        return refuse(source->text, "names nothing", err);
    if (source->kind == SOURCE_SERIAL)
        return name_serial(source, rest, err);
    if (source->kind == SOURCE_TCP)
        return name_tcp(source, rest, err);
    source->name = strdup(rest);
    return source->name ? ERR_OK : err_memory(err, source->text);
}

int source_new(const char *text, struct source **out, struct err *err)
{
    struct source *made = calloc(1, sizeof *made);
    if (!made)
        return err_memory(err, text);
    made->fd = -1;
    made->text = strdup(text);
    int failed = made->text ? name(made, err) : err_memory(err, text);
    if (failed)
        source_free(made);
    else
        *out = made;
    return failed;
}

void source_free(struct source *source)
{
    if (!source)
        return;
    source_close(source);
    free(source->text);
    free(source->name);
    free(source->port);
    free(source);
}

bool source_returns(const struct source *source)
{
    return source->kind != SOURCE_STDIN;
}

void source_close(struct source *source)
{
    /* Only ever read from: closing cannot lose anything. Standard input is left as it is. */
    if (source->fd >= 0 && source->kind != SOURCE_STDIN)
        (void)close(source->fd);
    source->fd = -1;
    source->met_writer = false;
    source->more = false;
    source->at = 0;
    source_forget_addresses(source);
}

/* ---- reading ---- */

/* A file that is shorter than what was read, or another one by now, begins anew. */
static int read_file(struct source *source, void *buffer, size_t room, size_t *count,
                     enum source_answer *answer, struct err *err)
{
    struct stat now, open_one;
    ssize_t got = pread(source->fd, buffer, room, source->at);
    if (got < 0)
        return err_errno(err, source->text, "read");
    *count = (size_t)got;
    source->at += got;
    source->more = (size_t)got == room;
    *answer = got > 0 ? SOURCE_BYTES : SOURCE_NOTHING;
    if (got > 0)
        return ERR_OK;
    bool other =
        stat(source->name, &now) < 0 || now.st_dev != source->device || now.st_ino != source->inode;
    if (other || (fstat(source->fd, &open_one) == 0 && open_one.st_size < source->at))
        *answer = SOURCE_OVER;
    return ERR_OK;
}

/* Is there anything to read? A read of what may block is only tried when there is. */
static bool readable(int fd, short *events)
{
    struct pollfd waiting = {fd, POLLIN, 0};
    int ready = poll(&waiting, 1, 0);
    *events = waiting.revents;
    return ready > 0;
}

int source_read(struct source *source, void *buffer, size_t room, size_t *count,
                enum source_answer *answer, struct err *err)
{
    short events = 0;
    *count = 0;
    if (source->kind == SOURCE_FILE)
        return read_file(source, buffer, room, count, answer, err);
    *answer = SOURCE_NOTHING;
    if (!readable(source->fd, &events))
        return ERR_OK;
    ssize_t got = read(source->fd, buffer, room);
    if (got > 0) {
        *count = (size_t)got;
        *answer = SOURCE_BYTES;
        source->met_writer = true;
        return ERR_OK;
    }
    if (got < 0 && (errno == EAGAIN || errno == EINTR))
        return ERR_OK;
    /* A pseudo-terminal whose other side is closed says EIO. */
    if (got < 0 && !(source->kind == SOURCE_SERIAL && errno == EIO))
        return err_errno(err, source->text, "read");
    /* A FIFO that nobody has opened for writing yet reads as if it were at its end. */
    if (source->kind != SOURCE_FIFO || source->met_writer || (events & POLLHUP))
        *answer = SOURCE_OVER;
    return ERR_OK;
}

int source_wait(struct source *source, int wake_fd, int timeout_ms, struct err *err)
{
    bool file = source->kind == SOURCE_FILE || source->fd < 0;
    /* A FIFO without a writer is ready for ever once there was one; without, poll waits. */
    struct pollfd waiting[] = {{file ? -1 : source->fd, POLLIN, 0}, {wake_fd, POLLIN, 0}};
    if (source->more)
        timeout_ms = 0;
    else if (file && (timeout_ms < 0 || timeout_ms > LOOK_AGAIN_MS))
        timeout_ms = LOOK_AGAIN_MS;
    if (poll(waiting, 2, timeout_ms) < 0 && errno != EINTR)
        return err_errno(err, source->text, "wait for");
    return ERR_OK;
}
