/*
 * test_review.c - the review screen as a person meets it: the real program on a terminal, keys in,
 * cells out, and what is in the case afterwards.
 */
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "terminal/screen.h"

enum { SECONDS = 120, RATE_HZ = 250, LINE_SIZE = 512 };

static char folder[] = "/tmp/incisura-review-XXXXXX";
static char program[LINE_SIZE];

static void header_text(FILE *file, const char *text, int width)
{
    (void)fprintf(file, "%-*.*s", width, width, text);
}

/* A plain EDF file of two channels: a slow saw and a fast one. Written by hand from the format's
 * description, so that nothing of the program makes its own input. */
static void write_edf(const char *path)
{
    static const char *const fields[][2] = {
        {"ECG II", "Pleth"}, {"", ""},         {"mV", ""}, {"-2", "-1"},   {"2", "1"},
        {"-2000", "-1000"},  {"2000", "1000"}, {"", ""},   {"250", "250"}, {"", ""}};
    static const int widths[] = {16, 80, 8, 8, 8, 8, 8, 80, 8, 32};
    FILE *file = fopen(path, "wb");
    if (!file)
        exit(2);
    header_text(file, "0", 8);
    header_text(file, "S-1", 80);
    header_text(file, "theatre", 80);
    header_text(file, "20.05.31", 8);
    header_text(file, "09.30.00", 8);
    header_text(file, "768", 8);
    header_text(file, "", 44);
    header_text(file, "120", 8);
    header_text(file, "1", 8);
    header_text(file, "2", 4);
    for (size_t i = 0; i < sizeof widths / sizeof *widths; i++) {
        for (int k = 0; k < 2; k++)
            header_text(file, fields[i][k], widths[i]);
    }
    for (int i = 0; i < SECONDS * 2 * RATE_HZ; i++) {
        int channel = i / RATE_HZ % 2, sample = i / (2 * RATE_HZ) * RATE_HZ + i % RATE_HZ;
        int value = channel == 0 ? sample * 16 % 4000 - 2000 : sample * 8 % 2000 - 1000;
        unsigned char bytes[2] = {(unsigned char)(value & 255), (unsigned char)(value >> 8 & 255)};
        (void)fwrite(bytes, 1, 2, file);
    }
    if (fclose(file) != 0)
        exit(2);
}

/* Runs a shell command; its first lines of output in `out`. */
static int run(const char *command, char *out, size_t size)
{
    FILE *pipe = popen(command, "r");
    if (!pipe)
        exit(2);
    size_t count = fread(out, 1, size - 1, pipe);
    out[count] = '\0';
    return pclose(pipe);
}

static void make_case(const char *name)
{
    char command[4 * LINE_SIZE], out[LINE_SIZE];
    (void)snprintf(command, sizeof command,
                   "cd %s && %s start %s --subject S-1 --procedure 'keyhole' --rater KM && "
                   "%s attach %s a.edf",
                   folder, program, name, program, name);
    if (run(command, out, sizeof out) != 0) {
        (void)printf("not ok a case can be made: %s\n", out);
        exit(1);
    }
}

static struct screen *open_case(const char *name, int rows, int columns)
{
    char path[LINE_SIZE];
    (void)snprintf(path, sizeof path, "%s/%s.case", folder, name);
    const char *const argv[] = {program, "review", path, NULL};
    return screen_start(rows, columns, argv);
}

static void check_marks(const char *name, const char *wanted, const char *what)
{
    char command[2 * LINE_SIZE], out[4 * LINE_SIZE];
    (void)snprintf(command, sizeof command, "cd %s && %s marks %s --csv 2>&1", folder, program,
                   name);
    int status = run(command, out, sizeof out);
    bool good = status == 0 && strstr(out, wanted);
    screen_check(NULL, good, what);
    if (!good)
        (void)printf("  wanted %s in:\n%s\n", wanted, out);
}

static void walk(int rows, int columns)
{
    char name[LINE_SIZE], what[LINE_SIZE];
    (void)snprintf(name, sizeof name, "walk-%d", columns);
    make_case(name);
    struct screen *screen = open_case(name, rows, columns);
    (void)snprintf(what, sizeof what, "%dx%d opens with its traces", columns, rows);
    screen_check(screen, screen_shows(screen, "ECG II") && screen_shows(screen, "09:30:00.000"),
                 what);
    screen_check(screen, screen_shows(screen, "letters drop marks"), "the first hint is there");
    screen_type(screen, ">>>");
    screen_check(screen, screen_shows(screen, "09:30:03.000"), "three seconds on");
    screen_type(screen, "c");
    screen_check(screen, screen_shows(screen, "saved:") && screen_shows(screen, "1 mark"),
                 "a letter drops a mark");
    screen_type(screen, ">p");
    screen_check(screen, screen_shows(screen, "propofol, value in mg"),
                 "a dose asks for its value");
    screen_type(screen, "1x\r");
    screen_check(screen, screen_shows(screen, "no such unit"), "a bad unit is refused in the line");
    screen_control(screen, 'u');
    screen_type(screen, "100 mg\r");
    screen_check(screen, screen_shows(screen, "propofol 100 mg"), "a typed dose is kept");
    screen_type(screen, ">p\x1b");
    screen_check(screen, screen_shows(screen, "1 incomplete"), "Esc leaves a dose incomplete");
    screen_press(screen, VTERM_KEY_BACKSPACE);
    screen_check(screen, screen_shows(screen, "undone"), "undo says what it undid");
    screen_control(screen, 'r');
    screen_check(screen, screen_shows(screen, "redone"), "redo says what it did again");
    screen_type(screen, "#");
    screen_check(screen, screen_shows(screen, "rejected"), "a mark is rejected");
    screen_type(screen, "3");
    screen_check(screen, screen_shows(screen, "60.000 s shown"), "zooms to a minute");
    screen_press(screen, VTERM_KEY_PAGEDOWN);
    screen_check(screen, screen_shows(screen, "+00:01:05.000"), "one page on is a minute");
    screen_type(screen, "0");
    screen_check(screen, screen_shows(screen, "2 min 00 s shown"), "zooms to the whole case");
    screen_type(screen, "?");
    screen_check(screen, screen_shows(screen, "keys that work now"), "help opens");
    screen_type(screen, "\x1b");
    screen_check(screen, screen_loses(screen, "keys that work now"), "help closes");
    screen_resize(screen, 12, 50);
    screen_check(screen, screen_shows(screen, "ECG II"), "a smaller screen is drawn again");
    screen_control(screen, 'q');
    screen_check(NULL, screen_end(screen) == 0, "leaves with status 0");
    check_marks(name, ",incision,3,", "the incision is in the case");
    check_marks(name, "propofol,4,,100,mg,", "so is the dose");
    check_marks(name, "rejected", "and the rejected mark is kept");
}

static void restores(void)
{
    make_case("signals");
    struct screen *screen = open_case("signals", 24, 80);
    screen_check(screen, screen_shows(screen, "ECG II") && screen_taken(screen),
                 "takes the alternate screen");
    screen_signal(screen, SIGTERM);
    screen_check(screen, screen_loses(screen, "ECG II") && !screen_taken(screen),
                 "gives the terminal back when told to end");
    screen_check(NULL, screen_end(screen) == 0, "and ends well");
    screen = open_case("signals", 24, 80);
    (void)screen_shows(screen, "ECG II");
    screen_signal(screen, SIGSEGV);
    screen_check(screen, screen_loses(screen, "ECG II") && !screen_taken(screen),
                 "gives the terminal back when it crashes");
    screen_check(NULL, screen_end(screen) != 0, "and a crash is not success");
}

/* Another program changes the case while it is open. */
static void sees_others(void)
{
    char command[2 * LINE_SIZE], out[LINE_SIZE];
    make_case("others");
    struct screen *screen = open_case("others", 24, 80);
    screen_check(screen, screen_shows(screen, "0 marks"), "begins without marks");
    (void)snprintf(command, sizeof command, "cd %s && %s mark others incision --at +00:00:02",
                   folder, program);
    screen_check(screen, run(command, out, sizeof out) == 0, "another program adds one");
    screen_check(screen, screen_shows(screen, "1 mark"), "and it appears by itself");
    screen_control(screen, 'q');
    screen_check(NULL, screen_end(screen) == 0, "leaves");
}

static void recording_alone(void)
{
    char path[LINE_SIZE];
    (void)snprintf(path, sizeof path, "%s/a.edf", folder);
    const char *const argv[] = {program, "review", path, NULL};
    struct screen *screen = screen_start(24, 80, argv);
    screen_check(screen, screen_shows(screen, "READ-ONLY"), "a recording alone is read-only");
    screen_type(screen, "c");
    screen_check(screen, screen_shows(screen, "a recording alone takes no marks"), "and says so");
    screen_control(screen, 'q');
    screen_check(NULL, screen_end(screen) == 0, "leaves");
}

int main(void)
{
    char path[LINE_SIZE], command[LINE_SIZE], out[LINE_SIZE];
    const char *given = getenv("INCISURA");
    if (!realpath(given ? given : "build/incisura", program) || !mkdtemp(folder))
        return 2;
    (void)snprintf(path, sizeof path, "%s/a.edf", folder);
    write_edf(path);
    walk(24, 80);
    walk(60, 200);
    restores();
    sees_others();
    recording_alone();
    (void)snprintf(command, sizeof command, "rm -r %s", folder);
    (void)run(command, out, sizeof out);
    return screen_result();
}
