/*
 * bench_keys.c - how far a key's stamp is from the moment it was typed, while the program draws
 * frames of some milliseconds without a break. Prints figures; asserts none.
 *
 *   bench_keys [KEYS [FRAME_MS]]
 */
#include <locale.h>
#include <poll.h>
#include <pty.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <sys/wait.h>
#include <unistd.h>

#include "base/ns.h"
#include "terminal/key_reader.h"
#include "terminal/session.h"

enum { ROWS = 60, COLUMNS = 200, KEYS = 1000, FRAME_MS = 3, GAP_MS = 37 };

struct seen {
    int64_t stamp_ns, handled_ns;
};

static int64_t now_ns(void)
{
    return key_stamp_now().boottime_ns;
}

/* As long in work as a frame takes, and another picture each time. */
static void draw(struct canvas *canvas, uint32_t *salt, int64_t frame_ns)
{
    int64_t until_ns = now_ns() + frame_ns;
    ++*salt;
    do {
        for (int i = 0; i < ROWS * COLUMNS; i++)
            canvas->cells[i] = (struct cell){.glyph = 'A' + ((uint32_t)i * *salt) % 26};
    } while (now_ns() < until_ns);
}

static void be_program(int out, int64_t frame_ns)
{
    struct session *session = NULL;
    struct canvas canvas = {0};
    struct event event = {0};
    uint32_t salt = 0;
    if (session_open(false, &session, NULL) || canvas_resize(&canvas, ROWS, COLUMNS, NULL))
        _exit(2);
    while (event.kind != EVENT_END) {
        draw(&canvas, &salt, frame_ns);
        if (session_show(session, &canvas, NULL))
            _exit(2);
        session_wait(session, 0, &event);
        struct seen seen = {event.boottime_ns, now_ns()};
        if (event.kind == EVENT_KEY && write(out, &seen, sizeof seen) != sizeof seen)
            _exit(2);
    }
    session_close(session);
    canvas_free(&canvas);
    _exit(0);
}

/* Reads what the program draws, as a terminal does, until a key was seen or the gap is over. */
static bool watch(int terminal, int in, int timeout_ms, struct seen *seen)
{
    static char drawn[65536];
    int64_t until_ns = now_ns() + timeout_ms * NS_PER_MS;
    int64_t left_ns;
    while ((left_ns = until_ns - now_ns()) > 0) {
        struct pollfd waiting[] = {{terminal, POLLIN, 0}, {in, POLLIN, 0}};
        if (poll(waiting, 2, (int)(left_ns / NS_PER_MS) + 1) < 0)
            return false;
        if (waiting[0].revents && read(terminal, drawn, sizeof drawn) <= 0)
            return false;
        if (seen && waiting[1].revents)
            return read(in, seen, sizeof *seen) == sizeof *seen;
    }
    return false;
}

static int by_size(const void *a, const void *b)
{
    const int64_t *x = a, *y = b;
    return (*x > *y) - (*x < *y);
}

static void print(const char *what, int64_t *errors_ns, int count)
{
    qsort(errors_ns, (size_t)count, sizeof *errors_ns, by_size);
    (void)printf("%-34s p50 %8.3f ms  p99 %8.3f ms  worst %8.3f ms\n", what,
                 1e-6 * (double)errors_ns[count / 2], 1e-6 * (double)errors_ns[count * 99 / 100],
                 1e-6 * (double)errors_ns[count - 1]);
}

int main(int argc, char **argv)
{
    int keys = argc > 1 ? atoi(argv[1]) : KEYS, frame_ms = argc > 2 ? atoi(argv[2]) : FRAME_MS;
    int terminal, told[2];
    struct winsize size = {.ws_row = ROWS, .ws_col = COLUMNS};
    int64_t *stamped_ns = calloc((size_t)keys + 1, sizeof *stamped_ns);
    int64_t *handled_ns = calloc((size_t)keys + 1, sizeof *handled_ns);
    if (keys < 1 || !stamped_ns || !handled_ns || pipe(told) < 0 || !setlocale(LC_ALL, "C.UTF-8"))
        return 2;
    (void)setenv("TERM", "xterm-256color", 1);
    pid_t program = forkpty(&terminal, NULL, NULL, &size);
    if (program == 0)
        be_program(told[1], frame_ms * NS_PER_MS);
    struct seen seen;
    (void)watch(terminal, told[0], 500, NULL);
    for (int i = 0; i < keys; i++) {
        (void)watch(terminal, told[0], 1 + i * 7 % GAP_MS, NULL);
        int64_t typed_ns = now_ns();
        if (write(terminal, "k", 1) != 1 || !watch(terminal, told[0], 10000, &seen))
            return 2;
        stamped_ns[i] = seen.stamp_ns - typed_ns;
        handled_ns[i] = seen.handled_ns - typed_ns;
    }
    (void)printf("%d keys, frames of %d ms, %d x %d cells\n", keys, frame_ms, COLUMNS, ROWS);
    print("key: stamp after it was typed", stamped_ns, keys);
    print("key: handled after it was typed", handled_ns, keys);
    (void)kill(program, SIGTERM);
    (void)watch(terminal, told[0], 1000, NULL);
    (void)waitpid(program, NULL, 0);
    free(stamped_ns);
    free(handled_ns);
    return 0;
}
