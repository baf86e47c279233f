/*
 * session.c - terminal set-up, input and output. Draws nothing of its own.
 *
 * ncurses' own screen is never touched after the start: keys are read through a pad, which makes
 * wget_wch() leave the screen to the painter. Nor does ncurses write to the terminal after the
 * start, as it waits until all of it is taken: what gives the terminal back is put together from
 * terminfo here, and goes out as frames do.
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
#include <unistd.h>

#include "terminal/key_reader.h"
#include "terminal/outlet.h"
#include "terminal/painter.h"

enum { ESCAPE_DELAY_MS = 25, BASIC_COLOURS = 8, MANY_COLOURS = 256 };
/* How long the terminal may take to show what is pending when it is given back. */
enum { LEAVING_MS = 200 };

struct session {
    SCREEN *screen;
    WINDOW *keys; /* a pad: reading from it paints nothing */
    struct key_reader *reader;
    uint64_t next_byte; /* number of the first byte of the next key */
    struct painter painter;
    struct outlet outlet;
    struct termios modes; /* while the terminal is ours */
    struct str enter;     /* takes the terminal over, as ncurses did at the start */
    int rows, columns;
    int ctrl_left, ctrl_right, ctrl_up, ctrl_down; /* ncurses' codes for them */
};

/* What signal handlers may touch. */
static int signal_pipe[2] = {-1, -1};
static struct {
    int fd; /* the outlet's */
    struct termios modes;
    char leave[256];
    size_t length; /* of leave */
} before;

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
    ssize_t written = write(before.fd, before.leave, before.length);
    (void)written;
    (void)tcsetattr(before.fd, TCSANOW, &before.modes);
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

/* A capability of the terminal; NULL when it has none of this name. */
static const char *capability(const char *name)
{
    const char *text = tigetstr(name);
    return text == (const char *)-1 ? NULL : text;
}

/* ncurses' code for an extended key such as "kLFT5", defining it when terminfo does not know it. */
static int extended_key(const char *name, const char *usual, int fallback)
{
    const char *sequence = capability(name);
    if (!sequence)
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

/* Appends a capability. Delays that old terminals ask for ("$<2>") are left out. */
static void put_capability(struct str *out, const char *text)
{
    while (text && *text) {
        const char *delay = strstr(text, "$<");
        const char *end = delay ? strchr(delay, '>') : NULL;
        str_put_n(out, text, end ? (size_t)(delay - text) : strlen(text));
        text = end ? end + 1 : "";
    }
}

/* What ncurses would send to take the terminal over, and to give it back. */
static int plan_switches(struct session *session, struct err *err)
{
    struct str leave = {0};
    const char *mouse = capability("XM"), *to = capability("cup");
    put_capability(&session->enter, capability("smcup"));
    put_capability(&session->enter, capability("smkx"));
    put_capability(&session->enter, capability("civis"));
    if (mouse)
        put_capability(&session->enter, tparm(mouse, 1L));
    else if (capability("kmous"))
        str_put(&session->enter, "\033[?1000h");
    str_put(&leave, "\033[?1000l\033[?1006l\033[0m");
    put_capability(&leave, capability("cnorm"));
    put_capability(&leave, capability("rmkx"));
    /* Where there is no second screen to leave, the cursor goes below what was shown. */
    if (to)
        put_capability(&leave, tparm(to, (long)LINES - 1, 0L));
    put_capability(&leave, capability("rmcup"));
    str_put(&leave, "\r");
    bool failed =
        str_failed(&leave) || str_failed(&session->enter) || leave.length > sizeof before.leave;
    if (!failed) {
        memcpy(before.leave, leave.text, leave.length);
        before.length = leave.length;
    }
    str_free(&leave);
    return failed ? err_memory(err, "the terminal") : ERR_OK;
}

static void set_up_keys(struct session *session)
{
    (void)keypad(session->keys, TRUE);
    (void)nodelay(session->keys, TRUE);
    (void)mousemask(BUTTON1_PRESSED | BUTTON4_PRESSED | BUTTON5_PRESSED, NULL);
    (void)mouseinterval(0);
    session->ctrl_left = extended_key("kLFT5", "\033[1;5D", KEY_MAX + 1);
    session->ctrl_right = extended_key("kRIT5", "\033[1;5C", KEY_MAX + 2);
    session->ctrl_up = extended_key("kUP5", "\033[1;5A", KEY_MAX + 3);
    session->ctrl_down = extended_key("kDN5", "\033[1;5B", KEY_MAX + 4);
}

static int set_up(struct session *session, struct err *err)
{
    session->screen = newterm(NULL, stdout, key_reader_stream(session->reader));
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
    session->keys = newpad(1, 1);
    if (!session->keys)
        return err_memory(err, "the terminal");
    set_up_keys(session);
    (void)refresh();
    bool ascii = strcmp(nl_langinfo(CODESET), "UTF-8") != 0;
    painter_init(&session->painter, colour_depth(), ascii);
    read_size(session);
    if (tcgetattr(before.fd, &session->modes) < 0)
        return err_errno(err, "the terminal", "set up");
    return plan_switches(session, err);
}

static int open_parts(struct session *session, bool keys_from_tty, struct err *err)
{
    int failed = outlet_open(&session->outlet, err);
    before.fd = session->outlet.fd;
    if (!failed && tcgetattr(before.fd, &before.modes) < 0)
        failed = err_errno(err, "the terminal", "ask");
    if (!failed)
        failed = key_reader_start(keys_from_tty, &session->reader, err);
    return failed ? failed : set_up(session, err);
}

int session_open(bool keys_from_tty, struct session **out, struct err *err)
{
    if ((!keys_from_tty && !isatty(STDIN_FILENO)) || !isatty(STDOUT_FILENO))
        return err_set(err, ERR_USAGE, "needs a terminal for input and output");
    struct session *made = calloc(1, sizeof *made);
    if (!made)
        return err_memory(err, "the terminal");
    made->outlet.fd = -1;
    before.length = 0;
    if (pipe2(signal_pipe, O_CLOEXEC | O_NONBLOCK) < 0) {
        free(made);
        return err_errno(err, "a pipe", "open");
    }
    int failed = open_parts(made, keys_from_tty, err);
    if (failed) {
        session_close(made);
        return failed;
    }
    set_handlers(true);
    *out = made;
    return ERR_OK;
}

/* Nothing may wait here either: the modes change at once, whatever is still on its way. */
static void give_back(struct session *session)
{
    outlet_end(&session->outlet, before.leave, before.length, LEAVING_MS);
    (void)tcsetattr(session->outlet.fd, TCSANOW, &before.modes);
}

void session_close(struct session *session)
{
    if (!session)
        return;
    if (session->screen)
        give_back(session);
    set_handlers(false);
    if (session->keys)
        (void)delwin(session->keys);
    if (session->screen)
        delscreen(session->screen);
    key_reader_stop(session->reader);
    outlet_close(&session->outlet);
    (void)close(signal_pipe[0]);
    (void)close(signal_pipe[1]);
    signal_pipe[0] = signal_pipe[1] = -1;
    painter_fini(&session->painter);
    str_free(&session->enter);
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
    give_back(session);
    (void)raise(SIGSTOP);
    (void)tcsetattr(session->outlet.fd, TCSANOW, &session->modes);
    str_put_n(&session->outlet.bytes, session->enter.text, session->enter.length);
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

/* Moves on to the next key's first byte. A character is as long as its bytes; a key with a name
 * ends with the last byte that was read; and without any, all that was read meant nothing. */
static void step_over(struct session *session, int answer, wint_t character)
{
    uint64_t taken = key_reader_taken(session->reader);
    char bytes[4];
    size_t length = session->painter.ascii ? 1 : utf8_put(bytes, (uint32_t)character);
    bool whole = answer == OK && session->next_byte + length <= taken;
    session->next_byte = whole ? session->next_byte + length : taken;
}

/* Takes one key out of ncurses, if one is there. */
static bool take_key(struct session *session, struct event *out)
{
    wint_t character = 0;
    int answer = wget_wch(session->keys, &character);
    uint64_t byte = session->next_byte;
    step_over(session, answer, character);
    if (answer == ERR)
        return false;
    struct key_stamp stamp = key_reader_stamp(session->reader, byte);
    out->boottime_ns = stamp.boottime_ns;
    out->utc_ns = stamp.utc_ns;
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

static void stamp_now(struct event *out)
{
    struct key_stamp stamp = key_stamp_now();
    out->boottime_ns = stamp.boottime_ns;
    out->utc_ns = stamp.utc_ns;
}

/* The terminal takes more of what is pending. */
static void write_on(struct session *session, struct event *out)
{
    if (outlet_push(&session->outlet, NULL))
        out->kind = EVENT_END;
    else
        out->kind = outlet_busy(&session->outlet) ? EVENT_NOTHING : EVENT_READY;
}

void session_wait(struct session *session, int timeout_ms, struct event *out)
{
    *out = (struct event){.kind = EVENT_TICK};
    if (take_key(session, out))
        return;
    bool busy = outlet_busy(&session->outlet);
    struct pollfd waiting[] = {{fileno(key_reader_stream(session->reader)), POLLIN, 0},
                               {signal_pipe[0], POLLIN, 0},
                               {busy ? session->outlet.fd : -1, POLLOUT, 0}};
    int ready = poll(waiting, 3, timeout_ms);
    stamp_now(out);
    if (ready < 0)
        out->kind = EVENT_NOTHING; /* a signal: its byte is in the pipe */
    else if (waiting[1].revents)
        take_signals(session, out);
    else if (waiting[0].revents && !take_key(session, out))
        /* The reader hangs up when the terminal does. */
        out->kind = waiting[0].revents & ~POLLIN ? EVENT_END : EVENT_NOTHING;
    else if (!waiting[0].revents && waiting[2].revents)
        write_on(session, out);
}

bool session_busy(const struct session *session)
{
    return outlet_busy(&session->outlet);
}

int session_show(struct session *session, const struct canvas *canvas, struct err *err)
{
    /* Keys may keep session_wait() from writing on. */
    int failed = outlet_push(&session->outlet, err);
    if (!failed && outlet_busy(&session->outlet))
        return ERR_OK;
    if (!failed)
        failed = painter_paint(&session->painter, canvas, &session->outlet.bytes, err);
    if (!failed)
        failed = outlet_push(&session->outlet, err);
    if (failed)
        session_repaint(session); /* what is on the screen now is anybody's guess */
    return failed;
}
