/*
 * session.c - terminal set-up, input and output. Draws nothing of its own.
 *
 * ncurses' own screen is never touched after the start: keys are read through a pad, which makes
 * wget_wch() leave the screen to the painter.
 */
#define NCURSES_WIDECHAR 1
#include "terminal/session.h"

#include <curses.h>
#include <errno.h>
#include <fcntl.h>
#include <langinfo.h>
#include <poll.h>
#include <signal.h>
#include <stdlib.h>
#include <string.h>
#include <sys/ioctl.h>
#include <termios.h>
#include <time.h>
#include <unistd.h>

#include "base/ns.h"
#include "terminal/painter.h"

enum { ESCAPE_DELAY_MS = 25, BASIC_COLOURS = 8, MANY_COLOURS = 256 };

struct session {
    SCREEN *screen;
    WINDOW *keys; /* a pad: reading from it paints nothing */
    struct painter painter;
    struct str bytes;
    int rows, columns;
    int ctrl_left, ctrl_right, ctrl_up, ctrl_down; /* ncurses' codes for them */
};

/* What signal handlers may touch. */
static int signal_pipe[2] = {-1, -1};
static struct termios terminal_before;

static const int caught[] = {SIGWINCH, SIGTERM, SIGHUP, SIGINT, SIGTSTP};
static const int crashes[] = {SIGSEGV, SIGBUS, SIGABRT, SIGFPE, SIGILL};

static void on_signal(int number)
{
    int saved = errno;
    char byte = (char)number;
    /* A full pipe already says that something came. */
    ssize_t written = write(signal_pipe[1], &byte, 1);
    (void)written;
    errno = saved;
}

/* Gives the terminal back with async-signal-safe calls alone, then crashes as before. */
static void on_crash(int number)
{
    static const char leave[] = "\033[?1000l\033[?1006l\033[0m\033[?25h\033[?1049l\r\n";
    ssize_t written = write(STDOUT_FILENO, leave, sizeof leave - 1);
    (void)written;
    (void)tcsetattr(STDIN_FILENO, TCSANOW, &terminal_before);
    (void)raise(number);
}

static void set_handlers(bool on)
{
    struct sigaction action = {.sa_handler = on ? on_signal : SIG_DFL, .sa_flags = SA_RESTART};
    (void)sigemptyset(&action.sa_mask);
    for (size_t i = 0; i < sizeof caught / sizeof *caught; i++)
        (void)sigaction(caught[i], &action, NULL);
    action.sa_handler = on ? on_crash : SIG_DFL;
    action.sa_flags = (int)SA_RESETHAND | SA_NODEFER;
    for (size_t i = 0; i < sizeof crashes / sizeof *crashes; i++)
        (void)sigaction(crashes[i], &action, NULL);
}

static void read_size(struct session *session)
{
    struct winsize size;
    if (ioctl(STDOUT_FILENO, TIOCGWINSZ, &size) == 0 && size.ws_row > 0 && size.ws_col > 0) {
        session->rows = size.ws_row;
        session->columns = size.ws_col;
    } else {
        session->rows = LINES;
        session->columns = COLS;
    }
}

/* ncurses' code for an extended key such as "kLFT5", defining it when terminfo does not know it. */
static int extended_key(const char *name, const char *usual, int fallback)
{
    const char *sequence = tigetstr(name);
    if (!sequence || sequence == (const char *)-1)
        sequence = usual;
    int code = key_defined(sequence);
    if (code > 0)
        return code;
    return define_key(sequence, fallback) == OK ? fallback : -1;
}

static enum theme_depth colour_depth(void)
{
    const char *plain = getenv("NO_COLOR");
    int colours = plain && *plain ? 0 : tigetnum("colors");
    return colours >= MANY_COLOURS ? THEME_256 : colours >= BASIC_COLOURS ? THEME_8 : THEME_NONE;
}

static int set_up(struct session *session, struct err *err)
{
    session->screen = newterm(NULL, stdout, stdin);
    if (!session->screen) {
        const char *term = getenv("TERM");
        return err_set(err, ERR_USAGE, "terminal '%s' is not known here; try TERM=xterm-256color",
                       term ? term : "");
    }
    (void)raw();
    (void)noecho();
    (void)nonl();
    (void)curs_set(0);
    (void)set_escdelay(ESCAPE_DELAY_MS);
    (void)refresh();
    session->keys = newpad(1, 1);
    if (!session->keys)
        return err_memory(err, "the terminal");
    (void)keypad(session->keys, TRUE);
    (void)nodelay(session->keys, TRUE);
    (void)mousemask(BUTTON1_PRESSED | BUTTON4_PRESSED | BUTTON5_PRESSED, NULL);
    (void)mouseinterval(0);
    session->ctrl_left = extended_key("kLFT5", "\033[1;5D", KEY_MAX + 1);
    session->ctrl_right = extended_key("kRIT5", "\033[1;5C", KEY_MAX + 2);
    session->ctrl_up = extended_key("kUP5", "\033[1;5A", KEY_MAX + 3);
    session->ctrl_down = extended_key("kDN5", "\033[1;5B", KEY_MAX + 4);
    bool ascii = strcmp(nl_langinfo(CODESET), "UTF-8") != 0;
    painter_init(&session->painter, colour_depth(), ascii);
    read_size(session);
    return ERR_OK;
}

int session_open(struct session **out, struct err *err)
{
    if (!isatty(STDIN_FILENO) || !isatty(STDOUT_FILENO) ||
        tcgetattr(STDIN_FILENO, &terminal_before) < 0)
        return err_set(err, ERR_USAGE, "needs a terminal for input and output");
    struct session *made = calloc(1, sizeof *made);
    if (!made)
        return err_memory(err, "the terminal");
    if (pipe2(signal_pipe, O_CLOEXEC | O_NONBLOCK) < 0) {
        free(made);
        return err_errno(err, "a pipe", "open");
    }
    int failed = set_up(made, err);
    if (failed) {
        session_close(made);
        return failed;
    }
    set_handlers(true);
    *out = made;
    return ERR_OK;
}

void session_close(struct session *session)
{
    if (!session)
        return;
    set_handlers(false);
    if (session->keys)
        (void)delwin(session->keys);
    if (session->screen) {
        (void)endwin();
        delscreen(session->screen);
    }
    (void)close(signal_pipe[0]);
    (void)close(signal_pipe[1]);
    signal_pipe[0] = signal_pipe[1] = -1;
    painter_fini(&session->painter);
    str_free(&session->bytes);
    free(session);
}

void session_size(const struct session *session, int *rows, int *columns)
{
    *rows = session->rows;
    *columns = session->columns;
}

void session_repaint(struct session *session)
{
    session->painter.fresh = true;
}

/* ^Z, or SIGTSTP from outside: hands the terminal back, sleeps until told to go on, takes it over
 * again. Stops by SIGSTOP, as SIGTSTP is what brought us here. */
static void suspend(struct session *session, struct event *out)
{
    (void)endwin();
    (void)raise(SIGSTOP);
    (void)reset_prog_mode();
    (void)clearok(curscr, TRUE);
    (void)refresh();
    (void)curs_set(0);
    read_size(session);
    session_repaint(session);
    out->kind = EVENT_RESIZE;
}

static void take_mouse(struct event *out)
{
    MEVENT mouse;
    if (getmouse(&mouse) != OK)
        return;
    out->row = mouse.y;
    out->column = mouse.x;
    out->kind = EVENT_MOUSE;
    if (mouse.bstate & BUTTON4_PRESSED)
        out->mouse = MOUSE_WHEEL_UP;
    else if (mouse.bstate & BUTTON5_PRESSED)
        out->mouse = MOUSE_WHEEL_DOWN;
    else if (mouse.bstate & BUTTON1_PRESSED)
        out->mouse = MOUSE_PRESS;
    else
        out->kind = EVENT_NOTHING;
}

static uint32_t function_key(const struct session *session, int code)
{
    static const struct {
        int code;
        uint32_t key;
    } names[] = {
        {KEY_LEFT, KEY_IS_LEFT},   {KEY_RIGHT, KEY_IS_RIGHT},   {KEY_UP, KEY_IS_UP},
        {KEY_DOWN, KEY_IS_DOWN},   {KEY_PPAGE, KEY_IS_PAGE_UP}, {KEY_NPAGE, KEY_IS_PAGE_DOWN},
        {KEY_HOME, KEY_IS_HOME},   {KEY_END, KEY_IS_END},       {KEY_IC, KEY_IS_INSERT},
        {KEY_DC, KEY_IS_DELETE},   {KEY_BTAB, KEY_IS_BACK_TAB}, {KEY_BACKSPACE, KEY_IS_BACKSPACE},
        {KEY_ENTER, KEY_IS_ENTER},
    };
    for (size_t i = 0; i < sizeof names / sizeof *names; i++) {
        if (names[i].code == code)
            return names[i].key;
    }
    if (code >= KEY_F(1) && code <= KEY_F(12))
        return KEY_IS_F((uint32_t)(code - KEY_F(0)));
    return code == session->ctrl_left    ? KEY_IS_CTRL_LEFT
           : code == session->ctrl_right ? KEY_IS_CTRL_RIGHT
           : code == session->ctrl_up    ? KEY_IS_CTRL_UP
           : code == session->ctrl_down  ? KEY_IS_CTRL_DOWN
                                         : 0;
}

static uint32_t character_key(wint_t character)
{
    if (character == '\n')
        return KEY_IS_ENTER;
    if (character == 0x7f || character == '\b')
        return KEY_IS_BACKSPACE;
    return (uint32_t)character;
}

/* Takes one key out of ncurses, if one is there. */
static bool take_key(struct session *session, struct event *out)
{
    wint_t character;
    int answer = wget_wch(session->keys, &character);
    if (answer == ERR)
        return false;
    out->kind = EVENT_NOTHING;
    if (answer == KEY_CODE_YES && character == KEY_MOUSE) {
        take_mouse(out);
    } else if (answer == OK && character == KEY_IS_CTRL('z')) {
        suspend(session, out);
    } else {
        out->key = answer == KEY_CODE_YES ? function_key(session, (int)character)
                                          : character_key(character);
        out->kind = out->key ? EVENT_KEY : EVENT_NOTHING;
    }
    return true;
}

static void take_signals(struct session *session, struct event *out)
{
    char numbers[64];
    ssize_t count = read(signal_pipe[0], numbers, sizeof numbers);
    bool end = false, stop = false;
    for (ssize_t i = 0; i < count; i++) {
        stop |= numbers[i] == SIGTSTP;
        end |= numbers[i] != SIGWINCH && numbers[i] != SIGTSTP;
    }
    if (stop && !end)
        suspend(session, out);
    out->kind = end ? EVENT_END : EVENT_RESIZE;
    read_size(session);
    (void)resizeterm(session->rows, session->columns);
    session_repaint(session);
}

static int64_t clock_ns(clockid_t clock)
{
    struct timespec now = {0};
    (void)clock_gettime(clock, &now);
    return now.tv_sec * NS_PER_S + now.tv_nsec;
}

static void stamp(struct event *out)
{
    out->boottime_ns = clock_ns(CLOCK_BOOTTIME);
    out->utc_ns = clock_ns(CLOCK_REALTIME);
}

void session_wait(struct session *session, int timeout_ms, struct event *out)
{
    *out = (struct event){.kind = EVENT_TICK};
    stamp(out);
    if (take_key(session, out))
        return;
    struct pollfd waiting[] = {{STDIN_FILENO, POLLIN, 0}, {signal_pipe[0], POLLIN, 0}};
    int ready = poll(waiting, 2, timeout_ms);
    stamp(out);
    if (ready < 0)
        out->kind = EVENT_NOTHING; /* a signal: its byte is in the pipe */
    else if (waiting[1].revents)
        take_signals(session, out);
    else if (waiting[0].revents && !take_key(session, out))
        /* A terminal that hung up stays readable, with nothing to read. */
        out->kind = waiting[0].revents & ~POLLIN ? EVENT_END : EVENT_NOTHING;
}

static int write_all(const char *bytes, size_t count, struct err *err)
{
    while (count > 0) {
        ssize_t written = write(STDOUT_FILENO, bytes, count);
        if (written < 0 && errno != EINTR && errno != EAGAIN)
            return err_errno(err, "the terminal", "write to");
        if (written < 0 && errno == EAGAIN)
            (void)poll(&(struct pollfd){STDOUT_FILENO, POLLOUT, 0}, 1, -1);
        bytes += written > 0 ? written : 0;
        count -= written > 0 ? (size_t)written : 0;
    }
    return ERR_OK;
}

int session_show(struct session *session, const struct canvas *canvas, struct err *err)
{
    str_clear(&session->bytes);
    int failed = painter_paint(&session->painter, canvas, &session->bytes, err);
    if (!failed && session->bytes.length > 0)
        failed = write_all(session->bytes.text, session->bytes.length, err);
    if (failed)
        session_repaint(session); /* what is on the screen now is anybody's guess */
    return failed;
}
