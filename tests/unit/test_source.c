/*
 * test_source.c - where live bytes come from: FIFO, pseudo-terminal, TCP, standard input, a file
 * that grows. Waits for conditions, never for time. Names are test_source_name.c's.
 */
#include <criterion/criterion.h>

#include <arpa/inet.h>
#include <errno.h>
#include <fcntl.h>
#include <netinet/in.h>
#include <netinet/tcp.h>
#include <poll.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <termios.h>
#include <unistd.h>

#include "recording/source_impl.h"

enum { TRIES = 20000 };

static char folder[] = "/tmp/incisura-source-XXXXXX";
static char path[64], text[80];

static void set_up(void)
{
    cr_assert_not_null(mkdtemp(folder));
    (void)snprintf(path, sizeof path, "%s/a", folder);
    (void)signal(SIGPIPE, SIG_IGN);
}

static void tear_down(void)
{
    char command[128];
    (void)snprintf(command, sizeof command, "rm -rf %s", folder);
    cr_expect_eq(system(command), 0);
}

TestSuite(source, .init = set_up, .fini = tear_down);

static struct source *name(const char *what)
{
    struct source *source = NULL;
    struct err err = {0};
    cr_assert_eq(source_new(what, &source, &err), 0, "%s", err.text);
    return source;
}

/* Until it is open; source_wait() is what a caller would do in between. */
static int open_until(struct source *source, struct err *err)
{
    bool open = false;
    for (int i = 0; i < TRIES && !open; i++) {
        int failed = source_open(source, &open, err);
        if (failed)
            return failed;
        if (!open)
            cr_assert_eq(source_wait(source, -1, 1, err), 0);
    }
    cr_assert(open);
    return ERR_OK;
}

static struct source *opened(const char *what)
{
    struct err err = {0};
    struct source *source = name(what);
    cr_assert_eq(open_until(source, &err), 0, "%s", err.text);
    return source;
}

static void open_again(struct source *source)
{
    struct err err = {0};
    source_close(source);
    cr_assert_eq(open_until(source, &err), 0, "%s", err.text);
}

static enum source_answer read_once(struct source *source, char *out, size_t room, size_t *count)
{
    struct err err = {0};
    enum source_answer answer;
    cr_assert_eq(source_read(source, out, room, count, &answer, &err), 0, "%s", err.text);
    cr_assert_eq(answer == SOURCE_BYTES, *count > 0);
    return answer;
}

/* The next answer that is not "nothing". */
static enum source_answer read_until(struct source *source, char *out, size_t room, size_t *count)
{
    struct err err = {0};
    for (int i = 0; i < TRIES; i++) {
        enum source_answer answer = read_once(source, out, room, count);
        if (answer != SOURCE_NOTHING)
            return answer;
        cr_assert_eq(source_wait(source, -1, 10, &err), 0, "%s", err.text);
    }
    cr_assert_fail("nothing came");
    return SOURCE_NOTHING;
}

/* Exactly these bytes come, in pieces of any size. */
static void expect_bytes(struct source *source, const char *want)
{
    char got[16];
    size_t count;
    for (size_t length = strlen(want); length > 0; length -= count, want += count) {
        cr_assert_eq(read_until(source, got, sizeof got, &count), SOURCE_BYTES);
        cr_assert_leq(count, length);
        cr_assert_eq(memcmp(got, want, count), 0, "'%.*s'", (int)count, got);
    }
}

static void expect_nothing(struct source *source)
{
    char got[16];
    size_t count;
    for (int i = 0; i < 20; i++)
        cr_assert_eq(read_once(source, got, sizeof got, &count), SOURCE_NOTHING);
}

static void expect_over(struct source *source)
{
    char got[16];
    size_t count;
    cr_assert_eq(read_until(source, got, sizeof got, &count), SOURCE_OVER);
}

static void put(int fd, const char *bytes)
{
    cr_assert_eq(write(fd, bytes, strlen(bytes)), (ssize_t)strlen(bytes), "%s", strerror(errno));
}

/* ---- what cannot be opened ---- */

Test(source, what_is_not_there_or_another_thing_is_one_line)
{
    struct err err = {0};
    bool open = false;
    char whole[128];
    static const char *const prefixes[] = {"fifo:", "", "serial:"};
    cr_assert_eq(mkdir(path, 0700), 0);
    for (size_t i = 0; i < 3; i++) {
        for (int there = 0; there < 2; there++) {
            (void)snprintf(whole, sizeof whole, "%s%s%s%s", prefixes[i], path, there ? "" : "/none",
                           i == 2 ? "@9600" : "");
            struct source *source = name(whole);
            for (int again = 0; again < 2; again++) {
                cr_expect_neq(source_open(source, &open, &err), 0, "%s", whole);
                cr_expect(!open && source->fd == -1);
                cr_expect_not_null(strstr(err.text, path), "%s", err.text);
            }
            source_free(source);
        }
    }
}

/* ---- FIFO ---- */

static void make_fifo(void)
{
    cr_assert_eq(mkfifo(path, 0600), 0);
    (void)snprintf(text, sizeof text, "fifo:%s", path);
}

Test(source, a_fifo_and_its_writers)
{
    struct err err = {0};
    make_fifo();
    struct source *source = opened(text);
    expect_nothing(source); /* never over before the first writer */
    cr_assert_eq(source_wait(source, -1, 1, &err), 0);
    expect_nothing(source);
    for (int turn = 0; turn < 3; turn++) {
        int writer = open(path, O_WRONLY);
        expect_nothing(source);
        put(writer, "one line\nhalf of ano");
        expect_bytes(source, "one line\nhalf of ano");
        expect_nothing(source);
        put(writer, "ther");
        (void)close(writer);
        expect_bytes(source, "ther");
        expect_over(source);
        open_again(source);
        expect_nothing(source);
    }
    source_free(source);
}

Test(source, a_writer_that_leaves_without_a_word_is_over)
{
    make_fifo();
    struct source *source = opened(text);
    int writer = open(path, O_WRONLY);
    expect_nothing(source);
    (void)close(writer);
    expect_over(source);
    source_free(source);
}

Test(source, waiting_ends_with_bytes_or_by_the_other_descriptor)
{
    struct err err = {0};
    int wake[2];
    make_fifo();
    struct source *source = opened(text);
    int writer = open(path, O_WRONLY);
    cr_assert_eq(pipe(wake), 0);
    put(wake[1], "x");
    cr_expect_eq(source_wait(source, wake[0], -1, &err), 0); /* would never end otherwise */
    put(writer, "y");
    cr_expect_eq(source_wait(source, -1, -1, &err), 0);
    expect_bytes(source, "y");
    (void)close(writer);
    cr_expect_eq(source_wait(source, -1, -1, &err), 0);
    expect_over(source);
    (void)close(wake[0]);
    (void)close(wake[1]);
    source_free(source);
}

/* ---- a pseudo-terminal ---- */

Test(source, a_serial_line_is_raw_and_silent)
{
    static const char bytes[] = "1,2\r\n\x03\x04\x11\x13\x1A\x7F\xFF\x80 tab\t\n";
    char back[16];
    int master = posix_openpt(O_RDWR | O_NOCTTY);
    cr_assert(master >= 0 && grantpt(master) == 0 && unlockpt(master) == 0);
    (void)snprintf(text, sizeof text, "serial:%s@115200", ptsname(master));
    struct source *source = opened(text);
    struct termios line;
    cr_assert_eq(tcgetattr(source->fd, &line), 0);
    cr_expect_eq(cfgetispeed(&line), B115200);
    cr_expect_eq(line.c_lflag & (tcflag_t)(ICANON | ECHO | ISIG), 0);
    expect_nothing(source);
    put(master, bytes);
    expect_bytes(source, bytes);
    expect_nothing(source);
    struct pollfd echo = {master, POLLIN, 0};
    cr_expect_eq(poll(&echo, 1, 0), 0, "an echo of %zd bytes", read(master, back, sizeof back));
    (void)close(master);
    expect_over(source);
    source_free(source);
}

/* ---- TCP ---- */

/* Listens on a free port of this machine; the text names it. */
static int listen_here(int family)
{
    struct sockaddr_in v4 = {.sin_family = AF_INET, .sin_addr.s_addr = htonl(INADDR_LOOPBACK)};
    struct sockaddr_in6 v6 = {.sin6_family = AF_INET6, .sin6_addr = IN6ADDR_LOOPBACK_INIT};
    bool six = family == AF_INET6;
    struct sockaddr *address = six ? (struct sockaddr *)&v6 : (struct sockaddr *)&v4;
    socklen_t size = six ? sizeof v6 : sizeof v4;
    int fd = socket(family, SOCK_STREAM, 0);
    if (fd < 0 || bind(fd, address, size) < 0) {
        if (fd >= 0)
            (void)close(fd);
        return -1;
    }
    cr_assert_eq(listen(fd, 0), 0);
    cr_assert_eq(getsockname(fd, address, &size), 0);
    (void)snprintf(text, sizeof text, six ? "tcp:[::1]:%d" : "tcp:127.0.0.1:%d",
                   ntohs(six ? v6.sin6_port : v4.sin_port));
    return fd;
}

static void expect_talk(int listener)
{
    struct source *source = opened(text);
    for (int turn = 0; turn < 2; turn++) {
        int peer = accept(listener, NULL, NULL);
        cr_assert_geq(peer, 0);
        expect_nothing(source);
        put(peer, "0,1,2\n0,3");
        expect_bytes(source, "0,1,2\n0,3");
        (void)close(peer);
        expect_over(source);
        if (turn == 0)
            open_again(source);
    }
    source_free(source);
}

Test(source, a_connection_talks_and_is_closed_by_its_peer)
{
    int listener = listen_here(AF_INET);
    cr_assert_geq(listener, 0);
    expect_talk(listener);
    (void)close(listener);
}

Test(source, a_connection_to_a_host_with_colons)
{
    int listener = listen_here(AF_INET6);
    if (listener >= 0) { /* else this machine has no IPv6: the text is looked at all the same */
        expect_talk(listener);
        (void)close(listener);
    }
    struct source *source = name("tcp:[::1]:4000");
    cr_expect_str_eq(source->name, "::1");
    cr_expect_str_eq(source->port, "4000");
    source_free(source);
}

Test(source, a_refused_connection_is_one_line_and_is_tried_again)
{
    struct err err = {0};
    int listener = listen_here(AF_INET);
    (void)close(listener);
    struct source *source = name(text);
    for (int i = 0; i < 3; i++) {
        err = (struct err){0};
        cr_expect_eq(open_until(source, &err), ERR_IO);
        cr_expect_not_null(strstr(err.text, text), "%s", err.text);
        cr_expect_not_null(strstr(err.text, strerror(ECONNREFUSED)), "%s", err.text);
        cr_expect_eq(source->fd, -1);
    }
    source_free(source);
}

/* Once nobody accepts and the queue is full, a connection is under way, and no error. */
Test(source, a_connection_under_way_is_told_apart)
{
    enum { MOST = 8 };
    struct source *sources[MOST] = {NULL};
    struct err err = {0};
    bool open = true;
    int listener = listen_here(AF_INET), count = 0;
    while (count < MOST && open) {
        sources[count] = name(text);
        for (int i = 0; i < 50; i++) {
            cr_assert_eq(source_open(sources[count], &open, &err), 0, "%s", err.text);
            if (open)
                break;
        }
        count++;
    }
    cr_expect(!open, "the queue took all");
    for (int i = 0; i < count; i++) {
        source_close(sources[i]); /* under way or not */
        cr_expect_eq(sources[i]->fd, -1);
        source_free(sources[i]);
    }
    (void)close(listener);
}

/* A device that is unplugged says nothing: asking it must begin within seconds, not hours. */
Test(source, a_peer_that_says_nothing_is_asked_whether_it_is_there)
{
    int on = 0, idle = 0, times = 0, every = 0;
    socklen_t size = sizeof on;
    int listener = listen_here(AF_INET);
    struct source *source = opened(text);
    cr_assert_eq(getsockopt(source->fd, SOL_SOCKET, SO_KEEPALIVE, &on, &size), 0);
    cr_assert_eq(getsockopt(source->fd, IPPROTO_TCP, TCP_KEEPIDLE, &idle, &size), 0);
    cr_assert_eq(getsockopt(source->fd, IPPROTO_TCP, TCP_KEEPINTVL, &every, &size), 0);
    cr_assert_eq(getsockopt(source->fd, IPPROTO_TCP, TCP_KEEPCNT, &times, &size), 0);
    cr_expect(on && idle + every * times <= 30, "after %d s", idle + every * times);
    source_free(source);
    (void)close(listener);
}

/* ---- standard input ---- */

Test(source, standard_input_ends_for_good)
{
    int ends[2];
    cr_assert_eq(pipe(ends), 0);
    cr_assert_eq(dup2(ends[0], STDIN_FILENO), STDIN_FILENO);
    struct source *source = opened("-");
    cr_expect_not(source_returns(source));
    expect_nothing(source);
    put(ends[1], "1,2\n");
    expect_bytes(source, "1,2\n");
    (void)close(ends[1]);
    expect_over(source);
    source_close(source);
    cr_expect_geq(fcntl(STDIN_FILENO, F_GETFD), 0, "it is left open");
    source_free(source);
}

Test(source, standard_input_from_a_file)
{
    int fd = open(path, O_CREAT | O_RDWR, 0600);
    put(fd, "1,2\n");
    cr_assert_eq(lseek(fd, 0, SEEK_SET), 0);
    cr_assert_eq(dup2(fd, STDIN_FILENO), STDIN_FILENO);
    struct source *source = opened("-");
    expect_bytes(source, "1,2\n");
    expect_over(source);
    source_free(source);
    (void)close(fd);
}

/* ---- a file that grows ---- */

Test(source, a_file_grows_and_is_never_over)
{
    int fd = open(path, O_CREAT | O_WRONLY, 0600);
    struct source *source = opened(path);
    expect_nothing(source);
    for (int i = 0; i < 3; i++) {
        put(fd, "one line\nhalf of ano");
        expect_bytes(source, "one line\nhalf of ano");
        expect_nothing(source);
    }
    (void)close(fd);
    expect_nothing(source);
    source_free(source);
}

Test(source, a_file_that_shrinks_or_is_another_begins_anew)
{
    struct err err = {0};
    char other[80];
    (void)snprintf(other, sizeof other, "%s.new", path);
    int fd = open(path, O_CREAT | O_WRONLY, 0600);
    put(fd, "a long beginning\n");
    struct source *source = opened(path);
    expect_bytes(source, "a long beginning\n");
    cr_assert_eq(ftruncate(fd, 0), 0);
    expect_over(source);
    cr_assert_eq(lseek(fd, 0, SEEK_SET), 0);
    put(fd, "short\n");
    open_again(source);
    expect_bytes(source, "short\n");
    expect_nothing(source);
    (void)close(fd);

    fd = open(other, O_CREAT | O_WRONLY, 0600);
    put(fd, "another\n");
    cr_assert_eq(rename(other, path), 0);
    expect_over(source);
    open_again(source);
    expect_bytes(source, "another\n");
    (void)close(fd);

    cr_assert_eq(unlink(path), 0);
    expect_over(source);
    source_close(source);
    cr_expect_eq(open_until(source, &err), ERR_IO);
    source_free(source);
}

/* A file that has much to give is not waited for. */
Test(source, a_file_with_more_to_read_is_not_waited_for)
{
    enum { PIECES = 4000 };
    char got[16];
    size_t count, total = 0;
    int fd = open(path, O_CREAT | O_WRONLY, 0600);
    for (int i = 0; i < PIECES; i++)
        put(fd, "0123456789abcdef");
    struct source *source = opened(path);
    struct err err = {0};
    /* With a pause between all reads this would take minutes, and the suite's time. */
    while (total < 16 * PIECES) {
        cr_assert_eq(source_wait(source, -1, 1000, &err), 0);
        if (read_once(source, got, sizeof got, &count) == SOURCE_BYTES)
            total += count;
    }
    expect_nothing(source);
    source_free(source);
    (void)close(fd);
}
