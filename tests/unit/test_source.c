/*
 * test_source.c - where live bytes come from: FIFO, pseudo-terminal, TCP on this machine, files
 * that grow; and what cannot be meant.
 */
#include <criterion/criterion.h>

#include <arpa/inet.h>
#include <fcntl.h>
#include <pty.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/socket.h>
#include <sys/stat.h>
#include <termios.h>
#include <unistd.h>

#include "recording/source.h"

static char folder[] = "/tmp/incisura-source-XXXXXX";
static char path[64], text[96];

static void set_up(void)
{
    cr_assert_not_null(mkdtemp(folder));
    (void)snprintf(path, sizeof path, "%s/s", folder);
}

static void tear_down(void)
{
    char command[128];
    (void)snprintf(command, sizeof command, "rm -rf %s", folder);
    cr_expect_eq(system(command), 0);
}

TestSuite(source, .init = set_up, .fini = tear_down);

static struct source *named(const char *name)
{
    struct source *source = NULL;
    struct err err = {0};
    cr_assert_eq(source_new(name, &source, &err), 0, "%s", err.text);
    return source;
}

/* Opens, waiting for a connection that is under way. */
static int open_up(struct source *source, struct err *err)
{
    bool open = false;
    int failed = ERR_OK;
    for (int i = 0; i < 100 && !failed && !open; i++)
        failed = source_open(source, &open, err);
    return failed;
}

/* Reads until something else than "nothing" is answered; "nothing" after a long wait. */
static enum source_answer next(struct source *source, char out[64])
{
    enum source_answer answer = SOURCE_NOTHING;
    struct err err = {0};
    size_t count = 0;
    for (int i = 0; i < 200 && answer == SOURCE_NOTHING; i++) {
        cr_assert_eq(source_wait(source, -1, 20, &err), 0, "%s", err.text);
        cr_assert_eq(source_read(source, out, 63, &count, &answer, &err), 0, "%s", err.text);
    }
    out[count] = '\0';
    return answer;
}

/* What one look says. */
static enum source_answer look(struct source *source)
{
    char out[64];
    enum source_answer answer;
    struct err err = {0};
    size_t count;
    cr_assert_eq(source_read(source, out, sizeof out, &count, &answer, &err), 0, "%s", err.text);
    return answer;
}

static void put(int fd, const char *bytes)
{
    cr_assert_eq(write(fd, bytes, strlen(bytes)), (ssize_t)strlen(bytes));
}

Test(source, texts_that_cannot_be_meant)
{
    static const char *const wrong[] = {"fifo:",           "tcp:host",      "tcp:host:0",
                                        "tcp:host:65536",  "tcp::1:4000:x", "tcp::::4000",
                                        "serial:/dev/x",   "serial:@9600",  "serial:/dev/x@9601",
                                        "serial:/dev/x@0", "tcp::80",       ""};
    for (size_t i = 0; i < sizeof wrong / sizeof *wrong; i++) {
        struct source *source = NULL;
        struct err err = {0};
        cr_expect_eq(source_new(wrong[i], &source, &err), ERR_USAGE, "'%s'", wrong[i]);
        cr_expect_null(source);
        cr_expect(*err.text && !strchr(err.text, '\n'));
    }
    struct source *good = named("tcp:[::1]:4000");
    cr_expect(source_returns(good));
    source_free(good);
    good = named("-");
    cr_expect(!source_returns(good));
    source_free(good);
}

Test(source, what_is_not_there_is_one_line)
{
    static const char *const names[] = {"fifo:/tmp/no/such/fifo", "serial:/tmp/no/such@9600",
                                        "/tmp/no/such/file"};
    for (size_t i = 0; i < sizeof names / sizeof *names; i++) {
        struct source *source = named(names[i]);
        struct err err = {0};
        cr_expect_eq(open_up(source, &err), ERR_IO);
        cr_expect(strstr(err.text, names[i]) && !strchr(err.text, '\n'), "%s", err.text);
        source_free(source);
    }
}

Test(source, a_fifo_waits_for_its_writer_and_sees_it_leave)
{
    char out[64];
    struct err err = {0};
    cr_assert_eq(mkfifo(path, 0600), 0);
    (void)snprintf(text, sizeof text, "fifo:%s", path);
    struct source *source = named(text);
    cr_assert_eq(open_up(source, &err), 0, "%s", err.text);
    cr_expect_eq(look(source), SOURCE_NOTHING, "nobody has opened it yet");
    for (int round = 0; round < 2; round++) {
        int writer = open(path, O_WRONLY);
        cr_assert_geq(writer, 0);
        put(writer, "abc");
        cr_expect_eq(next(source, out), SOURCE_BYTES);
        cr_expect_str_eq(out, "abc");
        cr_expect_eq(look(source), SOURCE_NOTHING);
        cr_assert_eq(close(writer), 0);
        cr_expect_eq(next(source, out), SOURCE_OVER);
        source_close(source);
        cr_assert_eq(open_up(source, &err), 0, "%s", err.text);
    }
    source_free(source);
}

Test(source, a_file_is_no_fifo_and_a_fifo_no_file)
{
    struct err err = {0};
    cr_assert_eq(mkfifo(path, 0600), 0);
    struct source *source = named(path);
    cr_expect_eq(open_up(source, &err), ERR_USAGE);
    cr_expect(strstr(err.text, "fifo:"), "%s", err.text);
    source_free(source);
    (void)snprintf(text, sizeof text, "fifo:%s", folder);
    source = named(text);
    cr_expect_neq(open_up(source, &err), 0);
    source_free(source);
}

Test(source, a_pseudo_terminal_is_a_serial_line)
{
    char out[64], name[64];
    int master, slave;
    struct termios line;
    struct err err = {0};
    cr_assert_eq(openpty(&master, &slave, name, NULL, NULL), 0);
    (void)snprintf(text, sizeof text, "serial:%s@115200", name);
    struct source *source = named(text);
    cr_assert_eq(open_up(source, &err), 0, "%s", err.text);
    cr_assert_eq(tcgetattr(slave, &line), 0);
    cr_expect_eq(line.c_lflag & (ECHO | ICANON | ISIG), 0);
    cr_expect_eq(cfgetispeed(&line), B115200);
    put(master, "a\r\n\003");
    cr_expect_eq(next(source, out), SOURCE_BYTES);
    cr_expect_str_eq(out, "a\r\n\003", "nothing is interpreted");
    cr_assert_eq(close(slave), 0);
    cr_assert_eq(close(master), 0);
    cr_expect_eq(next(source, out), SOURCE_OVER);
    source_free(source);
}

static int listen_here(int *port)
{
    struct sockaddr_in at = {.sin_family = AF_INET, .sin_addr.s_addr = htonl(INADDR_LOOPBACK)};
    socklen_t size = sizeof at;
    int fd = socket(AF_INET, SOCK_STREAM, 0);
    cr_assert_geq(fd, 0);
    cr_assert_eq(bind(fd, (struct sockaddr *)&at, size), 0);
    cr_assert_eq(listen(fd, 1), 0);
    cr_assert_eq(getsockname(fd, (struct sockaddr *)&at, &size), 0);
    *port = ntohs(at.sin_port);
    return fd;
}

Test(source, tcp_connects_reads_and_sees_the_end)
{
    char out[64];
    int port, listener = listen_here(&port);
    struct err err = {0};
    (void)snprintf(text, sizeof text, "tcp:127.0.0.1:%d", port);
    struct source *source = named(text);
    cr_assert_eq(open_up(source, &err), 0, "%s", err.text);
    int peer = accept(listener, NULL, NULL);
    cr_assert_geq(peer, 0);
    cr_expect_eq(look(source), SOURCE_NOTHING);
    put(peer, "xyz");
    cr_expect_eq(next(source, out), SOURCE_BYTES);
    cr_expect_str_eq(out, "xyz");
    cr_assert_eq(close(peer), 0);
    cr_expect_eq(next(source, out), SOURCE_OVER);
    source_close(source);
    cr_assert_eq(close(listener), 0);
    cr_expect_eq(open_up(source, &err), ERR_IO, "nobody listens any more");
    cr_expect(strstr(err.text, text) && !strchr(err.text, '\n'), "%s", err.text);
    source_free(source);
}

Test(source, a_file_grows_and_is_replaced)
{
    char out[64];
    struct err err = {0};
    int file = open(path, O_WRONLY | O_CREAT | O_APPEND, 0600);
    cr_assert_geq(file, 0);
    put(file, "one");
    struct source *source = named(path);
    cr_assert_eq(open_up(source, &err), 0, "%s", err.text);
    cr_expect_eq(next(source, out), SOURCE_BYTES);
    cr_expect_str_eq(out, "one");
    cr_expect_eq(look(source), SOURCE_NOTHING, "a growing file is never over");
    put(file, "two");
    cr_expect_eq(next(source, out), SOURCE_BYTES);
    cr_expect_str_eq(out, "two");
    cr_assert_eq(ftruncate(file, 0), 0);
    cr_expect_eq(next(source, out), SOURCE_OVER, "shorter than what was read");
    source_close(source);
    put(file, "new");
    cr_assert_eq(open_up(source, &err), 0);
    cr_expect_eq(next(source, out), SOURCE_BYTES);
    cr_expect_str_eq(out, "new");
    cr_assert_eq(unlink(path), 0);
    cr_expect_eq(next(source, out), SOURCE_OVER, "gone");
    cr_assert_eq(close(file), 0);
    source_free(source);
}
