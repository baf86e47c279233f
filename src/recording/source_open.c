/*
 * source_open.c - opening FIFOs, serial lines, connections and files. Blocks nowhere but in asking
 * for a host's addresses.
 */
#include <errno.h>
#include <fcntl.h>
#include <netinet/in.h>
#include <netinet/tcp.h>
#include <poll.h>
#include <string.h>
#include <sys/socket.h>
#include <sys/stat.h>
#include <termios.h>
#include <unistd.h>

#include "recording/source_impl.h"

static const struct {
    int baud;
    speed_t speed;
} bauds[] = {{1200, B1200},       {2400, B2400},       {4800, B4800},       {9600, B9600},
             {19200, B19200},     {38400, B38400},     {57600, B57600},     {115200, B115200},
             {230400, B230400},   {460800, B460800},   {500000, B500000},   {576000, B576000},
             {921600, B921600},   {1000000, B1000000}, {1152000, B1152000}, {1500000, B1500000},
             {2000000, B2000000}, {2500000, B2500000}, {3000000, B3000000}, {3500000, B3500000},
             {4000000, B4000000}};

static const speed_t *speed_of(int baud)
{
    for (size_t i = 0; i < sizeof bauds / sizeof *bauds; i++) {
        if (bauds[i].baud == baud)
            return &bauds[i].speed;
    }
    return NULL;
}

bool baud_known(int baud)
{
    return speed_of(baud) != NULL;
}

static int open_path(struct source *source, int flags, struct err *err)
{
    source->fd = open(source->name, O_RDONLY | O_NONBLOCK | O_CLOEXEC | flags);
    return source->fd < 0 ? err_errno(err, source->text, "open") : ERR_OK;
}

static int wrong_kind(struct source *source, const char *what, struct err *err)
{
    return err_set(err, ERR_USAGE, "source '%.100s': not %s", source->text, what);
}

static int open_fifo(struct source *source, struct err *err)
{
    struct stat state;
    int failed = open_path(source, 0, err);
    if (failed)
        return failed;
    if (fstat(source->fd, &state) < 0 || !S_ISFIFO(state.st_mode))
        return wrong_kind(source, "a FIFO; make one with mkfifo, or leave fifo: out", err);
    return ERR_OK;
}

static int open_file(struct source *source, struct err *err)
{
    struct stat state;
    int failed = open_path(source, 0, err);
    if (failed)
        return failed;
    if (fstat(source->fd, &state) < 0 || !S_ISREG(state.st_mode))
        return wrong_kind(source, "a file; a FIFO is fifo:PATH, a serial line serial:DEVICE@BAUD",
                          err);
    source->device = state.st_dev;
    source->inode = state.st_ino;
    source->at = 0;
    return ERR_OK;
}

/* Eight bits, no parity, one stop bit, nothing interpreted. */
static int open_serial(struct source *source, struct err *err)
{
    struct termios line;
    int failed = open_path(source, O_NOCTTY, err);
    if (failed)
        return failed;
    if (tcgetattr(source->fd, &line) < 0)
        return wrong_kind(source, "a serial device", err);
    cfmakeraw(&line);
    line.c_cflag |= CLOCAL | CREAD;
    line.c_cflag &= ~(tcflag_t)(CRTSCTS | CSTOPB | PARENB);
    const speed_t *speed = speed_of(source->baud);
    if (!speed || cfsetispeed(&line, *speed) < 0 || cfsetospeed(&line, *speed) < 0 ||
        tcsetattr(source->fd, TCSANOW, &line) < 0)
        return err_errno(err, source->text, "set up");
    return ERR_OK;
}

/* ---- TCP ---- */

void source_forget_addresses(struct source *source)
{
    if (source->addresses)
        freeaddrinfo(source->addresses);
    source->addresses = source->next_address = NULL;
}

static int find_addresses(struct source *source, struct err *err)
{
    struct addrinfo want = {.ai_socktype = SOCK_STREAM};
    int code = getaddrinfo(source->name, source->port, &want, &source->addresses);
    if (code != 0) {
        source->addresses = NULL;
        return err_set(err, ERR_IO, "%s: cannot find the host: %s", source->text,
                       gai_strerror(code));
    }
    source->next_address = source->addresses;
    return ERR_OK;
}

/* A device that goes without a word (unplugged, switched off) is noticed within half a minute, not
 * after the two hours that systems wait. Where an option is not known the connection serves. */
static void ask_when_silent(int fd)
{
    const int on = 1, idle_s = 10, every_s = 5, times = 3;
    (void)setsockopt(fd, SOL_SOCKET, SO_KEEPALIVE, &on, sizeof on);
    (void)setsockopt(fd, IPPROTO_TCP, TCP_KEEPIDLE, &idle_s, sizeof idle_s);
    (void)setsockopt(fd, IPPROTO_TCP, TCP_KEEPINTVL, &every_s, sizeof every_s);
    (void)setsockopt(fd, IPPROTO_TCP, TCP_KEEPCNT, &times, sizeof times);
}

/* Begins to connect to the next address; *open when that was done at once. */
static int begin_connect(struct source *source, bool *open, struct err *err)
{
    const struct addrinfo *to = source->next_address;
    source->next_address = to->ai_next;
    source->fd =
        socket(to->ai_family, to->ai_socktype | SOCK_NONBLOCK | SOCK_CLOEXEC, to->ai_protocol);
    if (source->fd < 0)
        return err_errno(err, source->text, "make a socket for");
    ask_when_silent(source->fd);
    *open = connect(source->fd, to->ai_addr, to->ai_addrlen) == 0;
    if (*open || errno == EINPROGRESS)
        return ERR_OK;
    return err_errno(err, source->text, "connect to");
}

/* How a connection that was under way has ended, if it has. */
static int end_connect(struct source *source, bool *open, struct err *err)
{
    struct pollfd waiting = {source->fd, POLLOUT, 0};
    int why = 0;
    socklen_t size = sizeof why;
    if (poll(&waiting, 1, 0) <= 0)
        return ERR_OK;
    if (getsockopt(source->fd, SOL_SOCKET, SO_ERROR, &why, &size) < 0)
        why = errno;
    *open = why == 0;
    errno = why;
    return why == 0 ? ERR_OK : err_errno(err, source->text, "connect to");
}

/* One address after the other, until one answers or none is left. */
static int open_tcp(struct source *source, bool *open, struct err *err)
{
    int failed = source->addresses ? ERR_OK : find_addresses(source, err);
    while (!failed && !*open) {
        bool under_way = source->fd >= 0;
        failed = under_way ? end_connect(source, open, err) : begin_connect(source, open, err);
        if (!failed)
            return ERR_OK;
        if (source->fd >= 0)
            (void)close(source->fd);
        source->fd = -1;
        if (source->next_address)
            failed = ERR_OK;
    }
    return failed;
}

int source_open(struct source *source, bool *open, struct err *err)
{
    int failed = ERR_OK;
    *open = false;
    switch (source->kind) {
    case SOURCE_FIFO:
        failed = open_fifo(source, err);
        break;
    case SOURCE_SERIAL:
        failed = open_serial(source, err);
        break;
    case SOURCE_STDIN:
        source->fd = STDIN_FILENO;
        break;
    case SOURCE_FILE:
        failed = open_file(source, err);
        break;
    case SOURCE_TCP:
        failed = open_tcp(source, open, err);
        if (failed || !*open) {
            if (failed)
                source_close(source);
            return failed;
        }
        source_forget_addresses(source);
        return ERR_OK;
    }
    if (failed)
        source_close(source);
    else
        *open = true;
    return failed;
}
