/*
 * test_keys.c - keys are taken and stamped as they arrive: while the program is busy, while the
 * terminal takes no output, and when standard input is for data.
 *
 * The program on the terminal is this one, started again with "inside": it draws, reports every key
 * through a pipe, and does as keys tell it: ! draw without end, ~ wait for a word, ^Q leave.
 */
#include <fcntl.h>
#include <locale.h>
#include <poll.h>
#include <pty.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/ioctl.h>
#include <termios.h>
#include <time.h>
#include <unistd.h>

#include "base/ns.h"
#include "terminal/key_reader.h"
#include "terminal/screen.h"
#include "terminal/session.h"

enum { ROWS = 24, COLUMNS = 80, PATIENCE_MS = 15000, PASTED = 6000, TEXT_SIZE = 8192 };
enum { DRY = 7 }; /* how far the picture is moved after a flood */

/* ---- inside ---- */

struct inside {
    struct session *session;
    struct canvas canvas;
    int report, word; /* file descriptors */
    bool flooding, told_busy;
    uint32_t frame;
    char typed[TEXT_SIZE]; /* since the last Enter */
    size_t length;
};

static void report(const struct inside *inside, const char *what, uint32_t key, int64_t ns)
{
    if (dprintf(inside->report, "%s %x %lld\n", what, key, (long long)ns) < 0)
        _exit(3);
}

/* Another picture each time while flooding, then one again and again; the last row tells which. */
static void draw(struct inside *inside)
{
    uint32_t salt = inside->flooding ? ++inside->frame : inside->frame ? DRY : 0;
    for (int i = 0; i < ROWS * COLUMNS; i++)
        inside->canvas.cells[i] = (struct cell){.glyph = 'A' + ((uint32_t)i + salt) % 26};
    const char *state = inside->flooding ? "flooding" : inside->frame ? "it is dry" : "calm";
    for (int i = 0; state[i]; i++)
        inside->canvas.cells[(ROWS - 1) * COLUMNS + i].glyph = (uint32_t)state[i];
}

/* Does what the key says; false when it says to leave. */
static bool obey(struct inside *inside, const struct event *event)
{
    char byte;
    report(inside, "key", event->key, event->boottime_ns);
    if (event->key == KEY_IS_CTRL('q'))
        return false;
    if (event->key == '!')
        inside->flooding = !inside->flooding;
    else if (event->key == '~' && read(inside->word, &byte, 1) != 1)
        _exit(3);
    else if (event->key == KEY_IS_ENTER) {
        if (dprintf(inside->report, "%.*s\n", (int)inside->length, inside->typed) < 0)
            _exit(3);
        inside->length = 0;
    } else if (event->key < 127 && inside->length < sizeof inside->typed)
        inside->typed[inside->length++] = (char)event->key;
    return true;
}

static void live(struct inside *inside)
{
    struct event event = {0};
    struct err err;
    do {
        draw(inside);
        if (session_show(inside->session, &inside->canvas, &err))
            _exit(4);
        if (session_busy(inside->session) && !inside->told_busy) {
            inside->told_busy = true;
            report(inside, "busy", 0, 0);
        }
        session_wait(inside->session, inside->flooding ? 0 : 500, &event);
    } while (event.kind != EVENT_END && (event.kind != EVENT_KEY || obey(inside, &event)));
}

static int be_inside(char **argv)
{
    static struct inside inside;
    struct err err = {0};
    (void)setlocale(LC_ALL, "");
    bool from_tty = strcmp(argv[2], "tty") == 0;
    inside.report = atoi(argv[3]);
    inside.word = atoi(argv[4]);
    if (session_open(from_tty, &inside.session, &err) ||
        canvas_resize(&inside.canvas, ROWS, COLUMNS, &err)) {
        (void)dprintf(inside.report, "%s\n", err.text);
        return 2;
    }
    live(&inside);
    session_close(inside.session);
    canvas_free(&inside.canvas);
    report(&inside, "closed", 0, 0);
    char data[16];
    ssize_t count = from_tty ? read(STDIN_FILENO, data, sizeof data) : 0;
    if (from_tty && dprintf(inside.report, "%.*s\n", (int)count, data) < 0)
        return 3;
    return 0;
}

/* ---- outside ---- */

static char self[4096];
static int reports[2], words[2];
static FILE *told;

static void make_pipes(void)
{
    if (pipe(reports) < 0 || pipe(words) < 0)
        exit(2);
    told = fdopen(reports[0], "r");
    if (!told)
        exit(2);
    /* Line by line as poll() sees them. */
    (void)setvbuf(told, NULL, _IONBF, 0);
}

static struct screen *start(bool with_data)
{
    char report_fd[12], word_fd[12];
    make_pipes();
    (void)snprintf(report_fd, sizeof report_fd, "%d", reports[1]);
    (void)snprintf(word_fd, sizeof word_fd, "%d", words[0]);
    const char *const plain[] = {self, "inside", "stdin", report_fd, word_fd, NULL};
    const char *const fed[] = {
        "/bin/sh", "-c", "echo 1,2 | \"$0\" inside tty $1 $2", self, report_fd, word_fd, NULL};
    struct screen *screen = screen_start(ROWS, COLUMNS, with_data ? fed : plain);
    screen_check(screen, screen_shows(screen, "calm") && screen_raw(screen), "opens");
    return screen;
}

static void end(struct screen *screen, const char *what)
{
    screen_check(NULL, screen_end(screen) == 0, what);
    (void)fclose(told);
    (void)close(reports[1]);
    (void)close(words[0]);
    (void)close(words[1]);
}

static bool next_line(char *line, int size)
{
    struct pollfd waiting = {reports[0], POLLIN, 0};
    if (poll(&waiting, 1, PATIENCE_MS) <= 0 || !fgets(line, size, told))
        return false;
    line[strcspn(line, "\n")] = '\0';
    return true;
}

/* The next report is this one; *ns is its time. */
static bool reported(const char *what, uint32_t key, int64_t *ns)
{
    char line[TEXT_SIZE + 2], name[16];
    unsigned got;
    long long time_ns;
    if (!next_line(line, sizeof line) || sscanf(line, "%15s %x %lld", name, &got, &time_ns) != 3)
        return false;
    *ns = time_ns;
    return strcmp(name, what) == 0 && got == key;
}

/* Types one key and sees it come, stamped neither before it was typed nor after it was reported. */
static bool comes(struct screen *screen, const char *typed, uint32_t key)
{
    int64_t stamp_ns = 0, before_ns = key_stamp_now().boottime_ns;
    screen_type(screen, typed);
    return reported("key", key, &stamp_ns) && stamp_ns >= before_ns &&
           stamp_ns <= key_stamp_now().boottime_ns;
}

static void flood(struct screen *screen)
{
    int64_t ns;
    screen_check(screen, comes(screen, "!", '!'), "told to draw without end");
    screen_check(screen, reported("busy", 0, &ns), "the terminal, not read from, takes no more");
}

/* The last row is painted last, and from the left: what stands at its end has come last of all. */
static bool all_as_drawn(struct screen *screen)
{
    enum { STATE = 9 }; /* columns of "it is dry" */
    char last[COLUMNS - STATE + 1] = "";
    for (int i = 0; i < COLUMNS - STATE; i++)
        last[i] = (char)('A' + ((ROWS - 1) * COLUMNS + STATE + i + DRY) % 26);
    bool good = screen_shows(screen, last);
    for (int row = 0; row < ROWS; row++) {
        const char *text = screen_row(screen, row);
        for (int column = row == ROWS - 1 ? STATE : 0; column < COLUMNS; column++)
            good &= text[column] == 'A' + (row * COLUMNS + column + DRY) % 26;
    }
    return good;
}

static void test_stopped(void)
{
    struct screen *screen = start(false);
    flood(screen);
    bool good = true;
    for (char c = 'a'; c <= 'z'; c++)
        good &= comes(screen, (char[]){c, '\0'}, (uint32_t)c);
    screen_check(screen, good, "letters come one by one while output is stopped");
    good = comes(screen, "\xc3\xa9", 0xe9) && comes(screen, "\033OA", KEY_IS_UP) &&
           comes(screen, "\033[1;5D", KEY_IS_CTRL_LEFT) && comes(screen, "\033", KEY_IS_ESCAPE) &&
           comes(screen, "x", 'x');
    screen_check(screen, good, "so do keys of several bytes");
    screen_check(screen, comes(screen, "!", '!'), "told to draw no more");
    screen_check(screen, screen_shows(screen, "it is dry") && all_as_drawn(screen),
                 "once output goes on, the last frame is all there");
    screen_control(screen, 'q');
    screen_check(screen, screen_left(screen) && screen_cooked(screen),
                 "and the terminal given back");
    end(screen, "exit 0 after output was stopped");
}

static void test_leaving_stopped(void)
{
    struct screen *screen = start(false);
    int64_t ns;
    flood(screen);
    screen_control(screen, 'q');
    screen_check(screen, reported("key", KEY_IS_CTRL('q'), &ns) && reported("closed", 0, &ns),
                 "leaving does not wait for a stopped terminal");
    screen_check(screen, screen_cooked(screen), "which has its modes again");
    screen_check(screen, screen_left(screen), "and its screen once it takes output");
    end(screen, "exit 0 after leaving with output stopped");
}

static void test_busy(void)
{
    struct screen *screen = start(false);
    static char pasted[PASTED + 2], line[TEXT_SIZE + 2];
    int64_t ns = 0, last_ns = 0;
    for (int i = 0; i < PASTED; i++)
        pasted[i] = (char)('a' + i * i % 26);
    screen_check(screen, comes(screen, "~", '~'), "told to be busy");
    screen_type(screen, pasted);
    screen_check(screen, write(words[1], "\n", 1) == 1, "and not to be any more");
    bool good = true, rising = true;
    for (int i = 0; good && i < PASTED; i++) {
        good = reported("key", (uint32_t)pasted[i], &ns);
        rising &= ns >= last_ns;
        last_ns = ns;
    }
    screen_check(screen, good && rising, "more keys than a pipe holds come in order");
    screen_type(screen, "\r");
    good = reported("key", KEY_IS_ENTER, &ns) && next_line(line, sizeof line);
    screen_check(screen, good && strcmp(line + 1, pasted) == 0, "none of them twice");
    screen_control(screen, 'q');
    end(screen, "exit 0 after much was typed at once");
}

static void test_data_on_stdin(void)
{
    struct screen *screen = start(true);
    char line[64] = "";
    int64_t ns;
    screen_check(screen, comes(screen, "k", 'k'), "keys come from the terminal");
    screen_control(screen, 'q');
    bool closed = reported("key", KEY_IS_CTRL('q'), &ns) && reported("closed", 0, &ns);
    screen_check(screen, closed && next_line(line, sizeof line) && strcmp(line, "1,2") == 0,
                 "standard input is left to its reader");
    screen_check(screen, screen_left(screen) && screen_cooked(screen),
                 "the terminal is given back");
    end(screen, "exit 0 after data on standard input");
}

/* Waits until the pipe holds this many bytes. */
static bool passed_on(struct key_reader *reader, int count)
{
    int fd = fileno(key_reader_stream(reader)), waiting = 0;
    int64_t until_ns = key_stamp_now().boottime_ns + PATIENCE_MS * NS_PER_MS;
    while (ioctl(fd, FIONREAD, &waiting) == 0 && waiting < count)
        if (key_stamp_now().boottime_ns > until_ns)
            return false;
    return waiting == count;
}

static void test_reader(void)
{
    int master, slave, saved = dup(STDIN_FILENO);
    struct termios modes;
    struct key_reader *reader = NULL;
    struct err err = {0};
    if (openpty(&master, &slave, NULL, NULL, NULL) < 0 || tcgetattr(slave, &modes) < 0)
        exit(2);
    cfmakeraw(&modes);
    if (tcsetattr(slave, TCSANOW, &modes) < 0 || dup2(slave, STDIN_FILENO) < 0)
        exit(2);
    bool good = key_reader_start(false, &reader, &err) == 0;
    screen_check(NULL, good, "the reader starts on a terminal");
    int64_t first = key_stamp_now().boottime_ns;
    good = good && write(master, "a", 1) == 1 && passed_on(reader, 1);
    int64_t second = key_stamp_now().boottime_ns;
    good = good && write(master, "bc", 2) == 2 && passed_on(reader, 3);
    int64_t third = key_stamp_now().boottime_ns;
    char bytes[4];
    int fd = fileno(key_reader_stream(reader));
    good = good && read(fd, bytes, 1) == 1 && key_reader_taken(reader) == 1;
    good = good && read(fd, bytes, 2) == 2 && key_reader_taken(reader) == 3;
    screen_check(NULL, good, "it counts what was read");
    int64_t a = key_reader_stamp(reader, 0).boottime_ns,
            b = key_reader_stamp(reader, 1).boottime_ns;
    screen_check(NULL, first <= a && a <= second && second <= b && b <= third,
                 "a byte that is read late has the stamp of its arrival");
    (void)close(master);
    struct pollfd waiting = {fd, POLLIN, 0};
    good = poll(&waiting, 1, PATIENCE_MS) == 1 && read(fd, bytes, 1) == 0;
    screen_check(NULL, good, "a terminal that hangs up ends it");
    key_reader_stop(reader);
    if (dup2(saved, STDIN_FILENO) < 0)
        exit(2);
    (void)close(saved);
    (void)close(slave);
}

int main(int argc, char **argv)
{
    if (argc == 5 && strcmp(argv[1], "inside") == 0)
        return be_inside(argv);
    ssize_t length = readlink("/proc/self/exe", self, sizeof self - 1);
    if (length < 0)
        return 2;
    self[length] = '\0';
    test_reader();
    test_stopped();
    test_leaving_stopped();
    test_busy();
    test_data_on_stdin();
    return screen_result();
}
