/*
 * play_target.c - finding a reader, noticing that it went, and writing to it.
 */
#include "play_target.h"

#include <arpa/inet.h>
#include <errno.h>
#include <fcntl.h>
#include <netinet/in.h>
#include <netinet/tcp.h>
#include <poll.h>
#include <stdlib.h>
#include <string.h>
#include <sys/socket.h>
#include <sys/stat.h>
#include <termios.h>
#include <time.h>
#include <unistd.h>

#include "base/ns.h"
#include "base/str.h"

/* A FIFO and a pseudo-terminal do not tell when somebody opens them: how often to look. */
enum { LOOK_MS = 5, PORT_MOST = 65535 };

struct kind {
    const char *prefix;
    int (*open)(struct play_target *target, const char *rest, struct err *err);
    int (*find)(struct play_target *target); /* a reader's descriptor; -1 = nobody */
    void (*lose)(struct play_target *target);
    short gone, wanted; /* poll's answers that mean that the reader went; what to ask for */
};

struct play_target {
    const struct kind *kind;
    struct str name;
    char *path;
    int base;   /* the listening socket, or the pseudo-terminal; -1 for a FIFO */
    int reader; /* -1 = nobody */
};

static int64_t now_ns(void)
{
    struct timespec now = {0};
    (void)clock_gettime(CLOCK_MONOTONIC, &now);
    return now.tv_sec * NS_PER_S + now.tv_nsec;
}

/* ---- a FIFO ---- */

static int fifo_open(struct play_target *target, const char *rest, struct err *err)
{
    struct stat is;
    str_putf(&target->name, "fifo:%s", rest);
    if (mkfifo(rest, 0600) < 0 && errno != EEXIST)
        return err_errno(err, rest, "make the FIFO");
    if (stat(rest, &is) < 0 || !S_ISFIFO(is.st_mode))
        return err_set(err, ERR_USAGE, "%s: is there and is no FIFO; name another path", rest);
    return ERR_OK;
}

static int fifo_find(struct play_target *target)
{
    return open(target->path, O_WRONLY | O_NONBLOCK | O_CLOEXEC);
}

static void close_reader(struct play_target *target)
{
    (void)close(target->reader);
}

/* ---- TCP ---- */

static int tcp_open(struct play_target *target, const char *rest, struct err *err)
{
    int64_t port;
    const int on = 1;
    struct sockaddr_in here = {.sin_family = AF_INET, .sin_addr = {htonl(INADDR_LOOPBACK)}};
    socklen_t size = sizeof here;
    if (!integer_parse(rest, &port) || port < 0 || port > PORT_MOST)
        return err_set(err, ERR_USAGE, "tcp:%s: a port is a number from 0 to %d", rest, PORT_MOST);
    here.sin_port = htons((uint16_t)port);
    target->base = socket(AF_INET, SOCK_STREAM | SOCK_NONBLOCK | SOCK_CLOEXEC, 0);
    if (target->base < 0 ||
        setsockopt(target->base, SOL_SOCKET, SO_REUSEADDR, &on, sizeof on) < 0 ||
        bind(target->base, (const struct sockaddr *)&here, sizeof here) < 0 ||
        listen(target->base, 8) < 0 ||
        getsockname(target->base, (struct sockaddr *)&here, &size) < 0)
        return err_errno(err, rest, "listen on the port");
    str_putf(&target->name, "tcp:127.0.0.1:%u", (unsigned)ntohs(here.sin_port));
    return ERR_OK;
}

static int tcp_find(struct play_target *target)
{
    const int on = 1;
    int fd = accept4(target->base, NULL, NULL, SOCK_NONBLOCK | SOCK_CLOEXEC);
    if (fd >= 0)
        (void)setsockopt(fd, IPPROTO_TCP, TCP_NODELAY, &on, sizeof on); /* else merely later */
    return fd;
}

/* ---- a pseudo-terminal ---- */

static int pty_open(struct play_target *target, const char *rest, struct err *err)
{
    char device[64];
    struct termios modes;
    struct stat is;
    str_put(&target->name, rest);
    target->base = posix_openpt(O_RDWR | O_NOCTTY | O_NONBLOCK | O_CLOEXEC);
    if (target->base < 0 || grantpt(target->base) < 0 || unlockpt(target->base) < 0 ||
        ptsname_r(target->base, device, sizeof device) != 0)
        return err_errno(err, "a pseudo-terminal", "make");
    int slave = open(device, O_RDWR | O_NOCTTY | O_CLOEXEC);
    if (slave < 0 || tcgetattr(slave, &modes) < 0)
        return err_errno(err, device, "open");
    cfmakeraw(&modes);
    int set = tcsetattr(slave, TCSANOW, &modes);
    (void)close(slave); /* from now on the terminal says when a reader has it open */
    if (set < 0)
        return err_errno(err, device, "set up");
    if (lstat(rest, &is) == 0 && S_ISLNK(is.st_mode))
        (void)unlink(rest); /* of an earlier play; symlink() tells if it stays */
    return symlink(device, rest) < 0 ? err_errno(err, rest, "make the link") : ERR_OK;
}

static int pty_find(struct play_target *target)
{
    struct pollfd is = {target->base, 0, 0};
    return poll(&is, 1, 0) >= 0 && !(is.revents & POLLHUP) ? target->base : -1;
}

/* What the reader left must not come before the next one's header. */
static void pty_lose(struct play_target *target)
{
    int slave = open(target->path, O_RDWR | O_NOCTTY | O_NONBLOCK | O_CLOEXEC);
    if (slave < 0)
        return;
    (void)tcflush(slave, TCIFLUSH); /* else the reader finds some of it, as on any serial line */
    (void)close(slave);
}

/* ---- all of them ---- */

static const struct kind kinds[] = {
    {"fifo:", fifo_open, fifo_find, close_reader, POLLERR, 0},
    {"tcp:", tcp_open, tcp_find, close_reader, POLLERR | POLLHUP | POLLRDHUP, POLLRDHUP},
    {"pty:", pty_open, pty_find, pty_lose, POLLHUP, 0},
};

static const struct kind *kind_of(const char *text)
{
    for (size_t i = 0; i < sizeof kinds / sizeof *kinds; i++) {
        size_t length = strlen(kinds[i].prefix);
        if (strncmp(text, kinds[i].prefix, length) == 0 && text[length])
            return &kinds[i];
    }
    return NULL;
}

int play_target_open(const char *text, struct play_target **out, struct err *err)
{
    const struct kind *kind = kind_of(text);
    if (!kind)
        return err_set(err, ERR_USAGE,
                       "cannot play to '%s'; write fifo:PATH, tcp:PORT or pty:LINKPATH", text);
    const char *rest = text + strlen(kind->prefix);
    struct play_target *made = calloc(1, sizeof *made);
    if (!made)
        return err_memory(err, text);
    *made = (struct play_target){.base = -1, .reader = -1};
    int failed = kind->open(made, rest, err);
    if (!failed) {
        made->kind = kind;
        made->path = strdup(rest);
        if (!made->path || str_failed(&made->name))
            failed = err_memory(err, text);
    }
    if (failed)
        play_target_close(made);
    else
        *out = made;
    return failed;
}

void play_target_close(struct play_target *target)
{
    if (!target)
        return;
    if (target->reader >= 0 && target->reader != target->base)
        (void)close(target->reader);
    if (target->base >= 0)
        (void)close(target->base);
    if (target->kind && target->kind->open == pty_open)
        (void)unlink(target->path); /* ours; gone already is as good */
    free(target->path);
    str_free(&target->name);
    free(target);
}

const char *play_target_name(const struct play_target *target)
{
    return str_text(&target->name);
}

static void lose(struct play_target *target)
{
    target->kind->lose(target);
    target->reader = -1;
}

/* Waits for the reader to take more or to go; false when it went. */
static bool look(struct play_target *target, short events, int64_t wait_ns)
{
    struct pollfd is = {target->reader, (short)(events | target->kind->wanted), 0};
    struct timespec wait = {wait_ns / NS_PER_S, wait_ns % NS_PER_S};
    if (ppoll(&is, 1, wait_ns < 0 ? NULL : &wait, NULL) > 0 && is.revents & target->kind->gone) {
        lose(target);
        return false;
    }
    return true;
}

bool play_target_wait(struct play_target *target, int64_t until_ns)
{
    for (;;) {
        int64_t left_ns = until_ns - now_ns();
        if (target->reader >= 0) {
            if (look(target, 0, left_ns > 0 ? left_ns : 0) && until_ns <= now_ns())
                return false;
            continue;
        }
        target->reader = target->kind->find(target);
        if (target->reader >= 0)
            return true;
        if (left_ns <= 0)
            return false;
        int64_t pause_ns = left_ns < LOOK_MS * NS_PER_MS ? left_ns : LOOK_MS * NS_PER_MS;
        (void)nanosleep(&(struct timespec){0, pause_ns}, NULL); /* cut short: merely looks sooner */
    }
}

void play_target_send(struct play_target *target, const void *bytes, size_t count)
{
    const char *from = bytes;
    while (count > 0 && target->reader >= 0) {
        ssize_t written = write(target->reader, from, count);
        if (written < 0 && errno == EAGAIN) {
            (void)look(target, POLLOUT, -1); /* who went is no reader any more */
        } else if (written < 0 && errno != EINTR) {
            lose(target);
        } else if (written > 0) {
            from += written;
            count -= (size_t)written;
        }
    }
}
