/*
 * outlet.c - writing to a terminal that may not listen.
 */
#include "terminal/outlet.h"

#include <errno.h>
#include <fcntl.h>
#include <poll.h>
#include <termios.h>
#include <time.h>
#include <unistd.h>

#include "base/ns.h"

int outlet_open(struct outlet *outlet, struct err *err)
{
    const char *name = ttyname(STDOUT_FILENO);
    int fd = name ? open(name, O_WRONLY | O_NONBLOCK | O_NOCTTY | O_CLOEXEC) : -1;
    if (fd < 0)
        fd = fcntl(STDOUT_FILENO, F_DUPFD_CLOEXEC, 3);
    if (fd < 0)
        return err_errno(err, "the terminal", "open");
    *outlet = (struct outlet){.fd = fd};
    return ERR_OK;
}

void outlet_close(struct outlet *outlet)
{
    if (outlet->fd >= 0)
        (void)close(outlet->fd);
    outlet->fd = -1;
    str_free(&outlet->bytes);
}

bool outlet_busy(const struct outlet *outlet)
{
    return outlet->sent < outlet->bytes.length;
}

static void forget(struct outlet *outlet)
{
    str_clear(&outlet->bytes);
    outlet->sent = 0;
}

int outlet_push(struct outlet *outlet, struct err *err)
{
    while (outlet_busy(outlet)) {
        ssize_t written = write(outlet->fd, outlet->bytes.text + outlet->sent,
                                outlet->bytes.length - outlet->sent);
        if (written < 0 && errno == EAGAIN)
            return ERR_OK;
        if (written < 0 && errno != EINTR) {
            int failed = err_errno(err, "the terminal", "write to");
            forget(outlet);
            return failed;
        }
        outlet->sent += written > 0 ? (size_t)written : 0;
    }
    forget(outlet);
    return ERR_OK;
}

static int64_t now_ms(void)
{
    struct timespec now = {0};
    (void)clock_gettime(CLOCK_MONOTONIC, &now);
    return now.tv_sec * 1000 + now.tv_nsec / NS_PER_MS;
}

/* Writes on until nothing is pending, the time is over, or the terminal is gone. */
static void drain(struct outlet *outlet, int64_t until_ms)
{
    int failed = outlet_push(outlet, NULL);
    while (!failed && outlet_busy(outlet)) {
        int64_t left = until_ms - now_ms();
        if (left <= 0)
            return;
        (void)poll(&(struct pollfd){outlet->fd, POLLOUT, 0}, 1, (int)left);
        failed = outlet_push(outlet, NULL);
    }
}

void outlet_end(struct outlet *outlet, const char *last, size_t length, int limit_ms)
{
    int64_t until_ms = now_ms() + limit_ms;
    drain(outlet, until_ms);
    str_put_n(&outlet->bytes, last, length);
    drain(outlet, until_ms);
    if (!outlet_busy(outlet))
        return;
    /* Makes room in the kernel for the one thing that has to come through. */
    (void)tcflush(outlet->fd, TCOFLUSH);
    forget(outlet);
    str_put_n(&outlet->bytes, last, length);
    drain(outlet, until_ms);
    forget(outlet);
}
