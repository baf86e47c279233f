/*
 * test_session.c - the terminal as it was found: after leaving, signals, stopping and going on,
 * resizing; and terminals without colour or UTF-8.
 */
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "terminal/screen.h"

static char folder[] = "/tmp/incisura-session-XXXXXX";
static char recording[64];

static void write_recording(void)
{
    FILE *file = fopen(recording, "w");
    if (!file)
        exit(2);
    (void)fprintf(file, "t,ECG II [mV]\n");
    for (int i = 0; i < 5000; i++)
        (void)fprintf(file, "%.3f,%d\n", i / 250.0, i % 100);
    if (fclose(file) != 0)
        exit(2);
}

static struct screen *start(int rows, int columns)
{
    const char *const argv[] = {getenv("INCISURA_ASAN"), "review", recording, NULL};
    struct screen *screen = screen_start(rows, columns, argv);
    screen_check(screen, screen_shows(screen, "ECG II") && screen_taken(screen), "opens");
    screen_check(screen, screen_raw(screen),
                 "no echo, no lines, no ^C and ^S of the terminal's own");
    return screen;
}

static void leave(struct screen *screen, const char *what)
{
    screen_control(screen, 'q');
    screen_check(screen, screen_left(screen) && screen_cooked(screen), what);
    int status = screen_end(screen);
    (void)printf("%s exit 0 after: %s\n", status == 0 ? "ok" : "not ok", what);
}

static void test_signal(int number, const char *name)
{
    struct screen *screen = start(24, 80);
    char what[80];
    screen_signal(screen, number);
    (void)snprintf(what, sizeof what, "%s gives the terminal back", name);
    screen_check(screen, screen_left(screen) && screen_cooked(screen), what);
    (void)screen_end(screen);
}

static void test_stop(bool by_key)
{
    struct screen *screen = start(24, 80);
    if (by_key)
        screen_control(screen, 'z');
    else
        screen_signal(screen, SIGTSTP);
    screen_check(screen, screen_left(screen) && screen_cooked(screen),
                 by_key ? "^Z gives the terminal back" : "SIGTSTP gives the terminal back");
    screen_check(screen, screen_stopped(screen), "and stops");
    screen_signal(screen, SIGCONT);
    bool painted = screen_shows(screen, "ECG II") && screen_shows(screen, "+00:00:00");
    screen_check(screen, painted && screen_taken(screen), "going on paints it all again");
    screen_check(screen, screen_raw(screen), "and has its modes again");
    screen_type(screen, "?");
    screen_check(screen, screen_shows(screen, "keys that work now"), "and keys work");
    screen_type(screen, "?");
    screen_check(screen, screen_shows(screen, "ECG II"), "help closes");
    leave(screen, "leaving after a stop");
}

static void test_resize(void)
{
    struct screen *screen = start(24, 80);
    screen_resize(screen, 5, 20);
    screen_check(screen, screen_shows(screen, "+00:00:00") || screen_shows(screen, "ECG"), "20x5");
    screen_resize(screen, 60, 200);
    screen_check(screen, screen_shows(screen, "ECG II") && screen_shows(screen, "marks"), "200x60");
    screen_resize(screen, 24, 80);
    screen_check(screen, screen_shows(screen, "ECG II"), "back to 80x24");
    leave(screen, "leaving after resizes");
}

static void test_plain(const char *term, const char *locale)
{
    char what[80];
    (void)setenv("SCREEN_TERM", term, 1);
    (void)setenv("SCREEN_LOCALE", locale, 1);
    const char *const argv[] = {getenv("INCISURA_ASAN"), "review", recording, NULL};
    struct screen *screen = screen_start(24, 80, argv);
    (void)snprintf(what, sizeof what, "TERM=%s, %s", term, locale);
    screen_check(screen, screen_shows(screen, "ECG II"), what);
    bool ascii = true;
    for (int row = 0; row < 24; row++) {
        for (const char *c = screen_row(screen, row); *c; c++)
            ascii &= (unsigned char)*c < 128;
    }
    screen_check(screen, ascii == (strcmp(locale, "C") == 0), "braille only where it can be shown");
    screen_control(screen, 'q');
    (void)screen_end(screen);
    (void)unsetenv("SCREEN_TERM");
    (void)unsetenv("SCREEN_LOCALE");
}

static void test_no_terminal(void)
{
    char command[256], first[256] = "", second[256] = "";
    (void)snprintf(command, sizeof command, "%s review %s </dev/null 2>&1; echo $?",
                   getenv("INCISURA_ASAN"), recording);
    FILE *output = popen(command, "r");
    bool two = output && fgets(first, sizeof first, output) && fgets(second, sizeof second, output);
    bool good = two && strstr(first, "needs a terminal") && strcmp(second, "2\n") == 0;
    (void)printf("%s without a terminal: one line and exit 2\n", good ? "ok" : "not ok");
    if (output)
        (void)pclose(output);
}

int main(void)
{
    if (!getenv("INCISURA_ASAN") || !mkdtemp(folder))
        return 2;
    (void)snprintf(recording, sizeof recording, "%s/a.csv", folder);
    write_recording();
    leave(start(24, 80), "leaving");
    test_signal(SIGTERM, "SIGTERM");
    test_signal(SIGHUP, "SIGHUP");
    test_signal(SIGINT, "SIGINT");
    test_signal(SIGABRT, "a crash");
    test_stop(true);
    test_stop(false);
    test_resize();
    test_plain("vt100", "C.UTF-8");
    test_plain("xterm-256color", "C");
    test_plain("screen", "C.UTF-8");
    test_no_terminal();
    (void)unlink(recording);
    (void)rmdir(folder);
    return screen_result();
}
