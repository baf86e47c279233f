/*
 * screen.c - pseudo-terminal, libvterm, waiting.
 */
#include "terminal/screen.h"

#include <poll.h>
#include <pty.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <termios.h>
#include <string.h>
#include <sys/ioctl.h>
#include <sys/wait.h>
#include <time.h>
#include <unistd.h>

enum { PATIENCE_MS = 15000, ROW_SIZE = 4096 };

struct screen {
    VTerm *vterm;
    VTermScreen *glass;
    int rows, columns;
    int terminal;
    pid_t program;
    bool taken;
    char row[ROW_SIZE];
};

static int failures;

static int on_property(VTermProp property, VTermValue *value, void *user)
{
    struct screen *screen = user;
    if (property == VTERM_PROP_ALTSCREEN)
        screen->taken = value->boolean;
    return 1;
}

static const VTermScreenCallbacks callbacks = {.settermprop = on_property};

struct screen *screen_start(int rows, int columns, const char *const *argv)
{
    struct screen *screen = calloc(1, sizeof *screen);
    struct winsize size = {.ws_row = (unsigned short)rows, .ws_col = (unsigned short)columns};
    if (!screen)
        abort();
    screen->program = forkpty(&screen->terminal, NULL, NULL, &size);
    if (screen->program == 0) {
        const char *term = getenv("SCREEN_TERM"), *locale = getenv("SCREEN_LOCALE");
        (void)setenv("TERM", term ? term : "xterm-256color", 1);
        (void)setenv("LC_ALL", locale ? locale : "C.UTF-8", 1);
        (void)execv(argv[0], (char *const *)argv);
        _exit(127);
    }
    if (screen->program < 0) {
        perror("forkpty");
        exit(2);
    }
    screen->rows = rows;
    screen->columns = columns;
    screen->vterm = vterm_new(rows, columns);
    vterm_set_utf8(screen->vterm, 1);
    screen->glass = vterm_obtain_screen(screen->vterm);
    vterm_screen_enable_altscreen(screen->glass, 1);
    vterm_screen_set_callbacks(screen->glass, &callbacks, screen);
    vterm_screen_reset(screen->glass, 1);
    return screen;
}

/* What the glass has to say (keys, answers to queries) goes to the program. */
static void send_out(struct screen *screen)
{
    char bytes[256];
    size_t count;
    while ((count = vterm_output_read(screen->vterm, bytes, sizeof bytes)) > 0) {
        if (write(screen->terminal, bytes, count) < 0)
            return;
    }
}

/* Takes in what the program wrote; false when nothing came in time or the program is gone. */
static bool take_in(struct screen *screen, int timeout_ms)
{
    struct pollfd waiting = {screen->terminal, POLLIN, 0};
    char bytes[16384];
    if (poll(&waiting, 1, timeout_ms) <= 0)
        return false;
    ssize_t count = read(screen->terminal, bytes, sizeof bytes);
    if (count <= 0)
        return false;
    (void)vterm_input_write(screen->vterm, bytes, (size_t)count);
    send_out(screen);
    return true;
}

void screen_type(struct screen *screen, const char *text)
{
    if (write(screen->terminal, text, strlen(text)) < 0)
        perror("type");
}

void screen_press(struct screen *screen, VTermKey key)
{
    vterm_keyboard_key(screen->vterm, key, VTERM_MOD_NONE);
    send_out(screen);
}

void screen_control(struct screen *screen, char letter)
{
    char byte = (char)(letter & 31);
    if (write(screen->terminal, &byte, 1) < 0)
        perror("control");
}

void screen_resize(struct screen *screen, int rows, int columns)
{
    struct winsize size = {.ws_row = (unsigned short)rows, .ws_col = (unsigned short)columns};
    vterm_set_size(screen->vterm, rows, columns);
    screen->rows = rows;
    screen->columns = columns;
    (void)ioctl(screen->terminal, TIOCSWINSZ, &size);
}

void screen_signal(struct screen *screen, int number)
{
    (void)kill(screen->program, number);
}

static size_t put_utf8(char *out, uint32_t code)
{
    if (code < 0x80) {
        out[0] = (char)code;
        return 1;
    }
    if (code < 0x800) {
        out[0] = (char)(0xc0 | code >> 6);
        out[1] = (char)(0x80 | (code & 63));
        return 2;
    }
    out[0] = (char)(0xe0 | code >> 12);
    out[1] = (char)(0x80 | (code >> 6 & 63));
    out[2] = (char)(0x80 | (code & 63));
    return 3;
}

const char *screen_row(struct screen *screen, int row)
{
    size_t at = 0;
    for (int column = 0; column < screen->columns && at + 4 < sizeof screen->row; column++) {
        VTermScreenCell cell = {0};
        (void)vterm_screen_get_cell(screen->glass, (VTermPos){row, column}, &cell);
        at += put_utf8(screen->row + at, cell.chars[0] ? cell.chars[0] : ' ');
    }
    screen->row[at] = '\0';
    return screen->row;
}

static bool on_glass(struct screen *screen, const char *text)
{
    for (int row = 0; row < screen->rows; row++) {
        if (strstr(screen_row(screen, row), text))
            return true;
    }
    return false;
}

static int64_t now_ms(void)
{
    struct timespec now;
    (void)clock_gettime(CLOCK_MONOTONIC, &now);
    return (int64_t)now.tv_sec * 1000 + now.tv_nsec / 1000000;
}

/* The letter after the name in /proc/PID/stat. */
static char state_of(pid_t pid)
{
    char path[64], line[512] = "";
    (void)snprintf(path, sizeof path, "/proc/%d/stat", (int)pid);
    FILE *file = fopen(path, "r");
    if (!file)
        return '?';
    const char *end = fgets(line, sizeof line, file) ? strrchr(line, ')') : NULL;
    (void)fclose(file);
    return end && end[1] ? end[2] : '?';
}

bool screen_stopped(const struct screen *screen)
{
    int64_t end = now_ms() + PATIENCE_MS;
    while (state_of(screen->program) != 'T' && now_ms() < end)
        (void)poll(NULL, 0, 5);
    return state_of(screen->program) == 'T';
}

static bool wait_until(struct screen *screen, const char *text, bool there)
{
    int64_t end = now_ms() + PATIENCE_MS;
    while (on_glass(screen, text) != there) {
        int64_t left = end - now_ms();
        if (left <= 0 || !take_in(screen, (int)left))
            return on_glass(screen, text) == there;
    }
    return true;
}

bool screen_shows(struct screen *screen, const char *text)
{
    return wait_until(screen, text, true);
}

bool screen_loses(struct screen *screen, const char *text)
{
    return wait_until(screen, text, false);
}

bool screen_left(struct screen *screen)
{
    int64_t end = now_ms() + PATIENCE_MS;
    while (screen->taken) {
        int64_t left = end - now_ms();
        if (left <= 0 || !take_in(screen, (int)left))
            break;
    }
    return !screen->taken;
}

bool screen_taken(const struct screen *screen)
{
    return screen->taken;
}

/* Waits until these local and input modes are all on, or all off. */
static bool modes_become(const struct screen *screen, tcflag_t local, tcflag_t input, bool on)
{
    struct termios modes;
    int64_t end = now_ms() + PATIENCE_MS;
    do {
        if (tcgetattr(screen->terminal, &modes) == 0 &&
            (modes.c_lflag & local) == (on ? local : 0) &&
            (modes.c_iflag & input) == (on ? input : 0))
            return true;
        (void)poll(NULL, 0, 5);
    } while (now_ms() < end);
    return false;
}

bool screen_cooked(const struct screen *screen)
{
    return modes_become(screen, ICANON | ECHO | ISIG, ICRNL | IXON, true);
}

bool screen_raw(const struct screen *screen)
{
    return modes_become(screen, ICANON | ECHO | ISIG, ICRNL | IXON, false);
}

int screen_end(struct screen *screen)
{
    int status = 0;
    int64_t end = now_ms() + PATIENCE_MS;
    while (now_ms() < end && take_in(screen, (int)(end - now_ms())))
        ;
    pid_t gone = waitpid(screen->program, &status, WNOHANG);
    for (; gone == 0 && now_ms() < end; gone = waitpid(screen->program, &status, WNOHANG))
        (void)poll(NULL, 0, 5);
    if (gone == 0) {
        (void)kill(screen->program, SIGKILL);
        (void)waitpid(screen->program, &status, 0);
        status = -1;
    }
    (void)close(screen->terminal);
    vterm_free(screen->vterm);
    free(screen);
    return status >= 0 && WIFEXITED(status) ? WEXITSTATUS(status) : -1;
}

void screen_check(struct screen *screen, bool good, const char *what)
{
    (void)printf("%s %s\n", good ? "ok" : "not ok", what);
    (void)fflush(stdout);
    if (good)
        return;
    failures++;
    for (int row = 0; screen && row < screen->rows; row++)
        (void)printf("  | %s\n", screen_row(screen, row));
}

int screen_result(void)
{
    return failures > 0;
}
