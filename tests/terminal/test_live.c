/*
 * test_live.c - the live screen as a person meets it, without a stream: the real program on a
 * terminal, keys in, cells out, and what is in the case afterwards; signals, a terminal that takes
 * nothing, a session that is killed.
 */
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

#include "terminal/screen.h"

enum { LINE_SIZE = 512, TEXT_SIZE = 16384 };

static char folder[] = "/tmp/incisura-live-XXXXXX";
static const char *program;

/* Runs a shell command in the folder; what it printed in `out`. */
static int run(const char *command, char *out, size_t size)
{
    char line[4 * LINE_SIZE];
    (void)snprintf(line, sizeof line, "cd %s && (%s) 2>&1", folder, command);
    FILE *pipe = popen(line, "r");
    if (!pipe)
        exit(2);
    size_t count = fread(out, 1, size - 1, pipe);
    out[count] = '\0';
    return pclose(pipe);
}

static void check(bool good, const char *what)
{
    screen_check(NULL, good, what);
}

static void make_case(const char *name)
{
    char command[2 * LINE_SIZE], out[TEXT_SIZE];
    (void)snprintf(command, sizeof command, "%s start %s --subject S-1 --rater KM --procedure x",
                   program, name);
    if (run(command, out, sizeof out) != 0) {
        check(false, "a case can be made");
        exit(1);
    }
}

static struct screen *open_as(const char *what, const char *name, int rows, int columns)
{
    char path[LINE_SIZE];
    (void)snprintf(path, sizeof path, "%s/%s.case", folder, name);
    const char *const argv[] = {program, what, path, NULL};
    return screen_start(rows, columns, argv);
}

static struct screen *begin(const char *name, int rows, int columns)
{
    struct screen *screen = open_as("live", name, rows, columns);
    screen_check(screen, screen_shows(screen, "SAVED") && screen_taken(screen), "a session begins");
    return screen;
}

/* ^Q as often as it is asked for. */
static void leave(struct screen *screen, const char *what)
{
    screen_control(screen, 'q');
    screen_control(screen, 'q');
    screen_check(screen, screen_left(screen) && screen_cooked(screen), what);
    check(screen_end(screen) == 0, "and ends well");
}

static void list_marks(const char *name, char out[TEXT_SIZE])
{
    char command[LINE_SIZE];
    (void)snprintf(command, sizeof command, "%s marks %s --csv 2>&1", program, name);
    if (run(command, out, TEXT_SIZE) != 0)
        check(false, "marks can be listed");
}

static void check_marks(const char *name, const char *wanted, const char *what)
{
    char out[TEXT_SIZE];
    list_marks(name, out);
    bool good = strstr(out, wanted) != NULL;
    check(good, what);
    if (!good)
        (void)printf("  wanted %s in:\n%s\n", wanted, out);
}

static int count_marks(const char *name)
{
    char out[TEXT_SIZE];
    int lines = 0;
    list_marks(name, out);
    for (const char *at = out; (at = strchr(at, '\n')); at++)
        lines++;
    return lines - 1; /* the heading */
}

/* ---- keys ---- */

static void stamps_and_spans(void)
{
    make_case("keys");
    struct screen *screen = begin("keys", 24, 80);
    screen_check(screen, screen_shows(screen, "no marks yet"), "an empty case says what to do");
    screen_check(screen, screen_shows(screen, "incision"), "the codes are in sight");
    screen_type(screen, "c");
    screen_check(screen, screen_shows(screen, "1 mark   SAVED"),
                 "a letter stamps, and it is saved");
    screen_type(screen, "12");
    screen_check(screen, screen_shows(screen, "12 s ago: now the event's key"), "digits wait");
    screen_type(screen, "i");
    screen_check(screen,
                 screen_shows(screen, "tube in \u00b13 s") && screen_shows(screen, "2 marks"),
                 "and date the next letter back, with its error");
    screen_type(screen, "99\x1b");
    screen_check(screen, screen_loses(screen, "99 s ago"), "Esc forgets digits");
    screen_type(screen, "g");
    screen_check(screen,
                 screen_shows(screen, "gas in abdomen  0:00:0") &&
                     screen_shows(screen, "saved, open"),
                 "a span runs");
    screen_type(screen, "g");
    screen_check(screen,
                 screen_shows(screen, "gas in abdomen for ") && screen_loses(screen, "saved, open"),
                 "the same key ends it");
    screen_type(screen, "\\");
    screen_check(screen, screen_shows(screen, "no code has this key"), "another key is no mark");
    leave(screen, "leaving gives the terminal back");
    check_marks("keys", ",incision,", "the incision is in the case");
    check(count_marks("keys") == 3, "three marks in all");
}

static void values(void)
{
    make_case("values");
    struct screen *screen = begin("values", 24, 80);
    screen_type(screen, "p");
    screen_check(screen, screen_shows(screen, "propofol in mg: "), "a dose asks for its value");
    screen_type(screen, "100,5\r");
    screen_check(screen, screen_shows(screen, "propofol 100.5 mg"), "a comma is a decimal point");
    screen_type(screen, "p");
    screen_check(screen, screen_shows(screen, "propofol in mg: 100.5 mg"),
                 "the last value is offered");
    screen_type(screen, "\r");
    screen_check(screen, screen_shows(screen, "2 marks   SAVED"), "Enter takes the offer");
    screen_type(screen, "p\x1b");
    screen_check(screen, screen_shows(screen, "3 marks, 1 incomplete"), "Esc leaves it incomplete");
    screen_type(screen, "p50\tc");
    screen_check(screen, screen_shows(screen, "propofol 50 mg") && screen_shows(screen, "5 marks"),
                 "Tab keeps what was typed, the next letter is an event");
    screen_type(screen, "p\tc");
    screen_check(screen, screen_shows(screen, "7 marks, 2 incomplete"),
                 "Tab does not take an offer that nobody looked at");
    screen_type(screen, "p5000\t");
    screen_check(screen, screen_shows(screen, "NOT kept: \"5000\""),
                 "Tab does not take what is not plausible, and says so");
    screen_type(screen, "c");
    screen_check(screen, screen_shows(screen, "9 marks, 3 incomplete"), "letters are events again");
    screen_type(screen, "f5 xx\r");
    screen_check(screen, screen_shows(screen, "no such unit"), "a wrong unit is refused");
    screen_control(screen, 'u');
    screen_type(screen, "5\r");
    screen_check(screen, screen_shows(screen, "Enter keeps it"), "an odd value is asked about");
    screen_type(screen, "\r");
    screen_check(screen, screen_shows(screen, "fentanyl 5 ug"), "Enter again keeps it");
    screen_type(screen, ".");
    screen_check(screen, screen_shows(screen, "propofol in mg: "), ". opens what lacks a value");
    screen_type(screen, "70\r");
    screen_check(screen, screen_shows(screen, "10 marks, 2 incomplete"), "and completes it");
    leave(screen, "leaving with incomplete marks");
    check_marks("values", ",100.5,mg", "the value with a comma is in the case");
    check_marks("values", ",50,mg", "so is the one before Tab");
    check_marks("values", ",70,mg", "and the one that came later");
}

static void notes_and_clocks(void)
{
    make_case("notes");
    struct screen *screen = begin("notes", 24, 80);
    screen_type(screen, "\r");
    screen_check(screen, screen_shows(screen, "note: "), "Enter asks for a note");
    screen_type(screen, "blood on floor\r");
    screen_check(screen, screen_shows(screen, "\"blood on floor\""), "and keeps it");
    screen_control(screen, 't');
    screen_check(screen,
                 screen_shows(screen, "sync: this laptop says") && screen_shows(screen, "2 marks"),
                 "^T is a sync mark");
    screen_control(screen, 'd');
    screen_check(screen, screen_shows(screen, "the device's clock says: "), "^D asks for a clock");
    screen_type(screen, "25:99\r");
    screen_check(screen, screen_shows(screen, "a time of day, then whose"), "no time is refused");
    screen_control(screen, 'u');
    screen_type(screen, "14:05:02 monitor\r");
    screen_check(screen, screen_shows(screen, "3 marks   SAVED"), "a time is kept");
    screen_check(screen, screen_shows(screen, "? keys") && screen_shows(screen, "^T sync"),
                 "the hint is whole at 80 columns");
    screen_type(screen, "?");
    screen_check(screen, screen_shows(screen, "Space next page"), "help opens");
    screen_check(screen,
                 screen_shows(screen, "then closes it") &&
                     screen_shows(screen, "the device's screen showed"),
                 "its lines are whole at 80 columns");
    screen_type(screen, " ");
    screen_check(screen, screen_shows(screen, "page 2 of"), "and has pages");
    screen_type(screen, "?");
    screen_check(screen, screen_loses(screen, "Space next page"), "and closes");
    screen_type(screen, "?");
    (void)screen_shows(screen, "Space next page");
    screen_type(screen, "c");
    screen_check(screen, screen_shows(screen, "4 marks"), "a letter stamps with help open, too");
    leave(screen, "leaving after help");
    check_marks("notes", "blood on floor", "the note is in the case");
    check_marks("notes", "device clock 14:05:02 monitor", "so is the device's clock");
}

static void taking_back(void)
{
    make_case("back");
    struct screen *screen = begin("back", 24, 80);
    screen_type(screen, "gcg");
    screen_check(screen, screen_shows(screen, "gas in abdomen for "), "a span around an incision");
    screen_press(screen, VTERM_KEY_BACKSPACE);
    screen_check(screen, screen_shows(screen, "end taken back") && screen_shows(screen, "open"),
                 "Backspace takes back the newest: the end of the span");
    screen_type(screen, "=");
    screen_check(screen,
                 screen_shows(screen, "put back") && screen_shows(screen, "gas in abdomen for "),
                 "= puts the end back");
    screen_press(screen, VTERM_KEY_BACKSPACE);
    screen_press(screen, VTERM_KEY_BACKSPACE);
    screen_check(screen,
                 screen_shows(screen, "taken back: incision") && screen_shows(screen, "1 mark "),
                 "again: the mark before");
    screen_press(screen, VTERM_KEY_BACKSPACE);
    screen_check(screen, screen_shows(screen, "taken back: gas") && screen_shows(screen, "0 marks"),
                 "and the one before that");
    screen_press(screen, VTERM_KEY_BACKSPACE);
    screen_check(screen, screen_shows(screen, "nothing of this session to take back"),
                 "until there is none");
    screen_type(screen, "===");
    screen_check(screen,
                 screen_shows(screen, "2 marks   SAVED") &&
                     screen_shows(screen, "gas in abdomen for "),
                 "= puts them back one after the other");
    leave(screen, "leaving after taking back");
    check(count_marks("back") == 2, "both are in the case");
}

/* ---- sizes ---- */

static void sizes(void)
{
    make_case("sizes");
    struct screen *screen = begin("sizes", 24, 80);
    screen_type(screen, "g");
    screen_check(screen, screen_shows(screen, "gas in abdomen  0:"), "80x24");
    screen_resize(screen, 60, 200);
    screen_check(screen, screen_shows(screen, "skin closure") && screen_shows(screen, "SAVED"),
                 "200x60");
    screen_resize(screen, 5, 20);
    screen_check(screen, screen_shows(screen, "SAVED"), "20x5 says whether all is saved");
    screen_type(screen, "c");
    screen_resize(screen, 24, 80);
    screen_check(screen, screen_shows(screen, "2 marks") && screen_shows(screen, "incision"),
                 "a letter typed at 20x5 is a mark");
    leave(screen, "leaving after resizes");
}

/* ---- two programs ---- */

static void second_session(void)
{
    char command[LINE_SIZE], out[TEXT_SIZE];
    make_case("twice");
    struct screen *screen = begin("twice", 24, 80);
    struct screen *second = open_as("live", "twice", 24, 200);
    screen_check(second, screen_shows(second, "a live session of KM runs already, since 20"),
                 "a second session is refused: who, and since when");
    check(screen_end(second) == 2, "with status 2");
    screen_type(screen, "c");
    screen_check(screen, screen_shows(screen, "1 mark   SAVED"), "the first goes on");
    leave(screen, "the first leaves");
    (void)snprintf(command, sizeof command, "%s history twice --verify", program);
    check(run(command, out, sizeof out) == 0, "the history verifies");
    screen = begin("twice", 24, 80);
    leave(screen, "and then another may begin");
}

static void review_beside(void)
{
    make_case("beside");
    struct screen *live = begin("beside", 24, 80);
    screen_type(live, "c");
    screen_check(live, screen_shows(live, "1 mark   SAVED"), "live stamps");
    struct screen *review = open_as("review", "beside", 24, 80);
    screen_check(review, screen_shows(review, "1 mark"), "review shows the mark");
    screen_type(live, "a");
    screen_check(live, screen_shows(live, "2 marks   SAVED"), "live stamps on");
    screen_check(review, screen_shows(review, "2 marks"), "and review sees it");
    screen_type(review, "m");
    screen_check(review, screen_shows(review, "3 marks"), "review drops a mark");
    screen_check(live, screen_shows(live, "3 marks   SAVED"), "and live sees it");
    screen_type(review, "#");
    screen_check(review, screen_shows(review, "rejected"), "review rejects it");
    screen_check(live, screen_shows(live, "taken back") && screen_shows(live, "2 marks"),
                 "and live shows that");
    screen_type(live, "=");
    screen_check(live, screen_shows(live, "nothing of this session was taken back"),
                 "what others reject is not put back by =");
    screen_control(review, 'q');
    check(screen_end(review) == 0, "review leaves");
    leave(live, "live leaves");
}

/* ---- signals ---- */

static void ends_by_signal(int number, const char *name)
{
    char what[80];
    make_case(name);
    struct screen *screen = begin(name, 24, 80);
    screen_type(screen, "gc");
    screen_check(screen, screen_shows(screen, "2 marks"), "marks before a signal");
    screen_signal(screen, number);
    (void)snprintf(what, sizeof what, "%s gives the terminal back", name);
    screen_check(screen, screen_left(screen) && screen_cooked(screen), what);
    check(screen_end(screen) == 0, "ends well");
    check(count_marks(name) == 2, "with both marks in the case");
    screen = begin(name, 24, 80);
    screen_check(screen, screen_shows(screen, "gas in abdomen  0:"), "the span runs on");
    leave(screen, "the next session leaves");
}

static void stops_and_goes_on(void)
{
    make_case("stop");
    struct screen *screen = begin("stop", 24, 80);
    screen_type(screen, "c");
    screen_check(screen, screen_shows(screen, "1 mark"), "a mark before the stop");
    screen_signal(screen, SIGTSTP);
    screen_check(screen, screen_left(screen) && screen_cooked(screen),
                 "SIGTSTP gives the terminal back");
    screen_check(screen, screen_stopped(screen), "and stops");
    screen_signal(screen, SIGCONT);
    screen_check(screen,
                 screen_shows(screen, "1 mark   SAVED") && screen_taken(screen) &&
                     screen_raw(screen),
                 "SIGCONT takes it again");
    screen_type(screen, "c");
    screen_check(screen, screen_shows(screen, "2 marks   SAVED"), "and letters stamp again");
    leave(screen, "leaving after a stop");
}

/* Nobody reads the terminal: what is typed is stamped and saved all the same. */
static void deaf_terminal(void)
{
    char out[TEXT_SIZE];
    make_case("deaf");
    struct screen *screen = begin("deaf", 60, 200);
    /* Painting it all again is some 20 kB: the terminal is full after a few, as nothing is read. */
    for (int i = 0; i < 10; i++)
        screen_control(screen, 'l');
    for (int i = 0; i < 40; i++) {
        screen_control(screen, 'l');
        screen_type(screen, i % 2 ? "c" : "a");
    }
    int there = 0;
    for (int i = 0; i < 600 && there < 40; i++) {
        there = count_marks("deaf");
        (void)nanosleep(&(struct timespec){0, 50000000}, NULL);
    }
    list_marks("deaf", out);
    check(there == 40, "a terminal that takes nothing loses no mark");
    screen_check(screen, screen_shows(screen, "40 marks   SAVED"),
                 "and shows them when it listens");
    leave(screen, "leaving after that");
}

/* ---- killed ---- */

static void goes_on_after_a_kill(void)
{
    char before[TEXT_SIZE], after[TEXT_SIZE];
    make_case("killed");
    struct screen *screen = begin("killed", 24, 80);
    screen_type(screen, "g");
    screen_check(screen, screen_shows(screen, "gas in abdomen  0:00:03"), "a span runs for 3 s");
    screen_check(screen, screen_shows(screen, "1 mark"), "and is counted");
    list_marks("killed", before);
    screen_signal(screen, SIGKILL);
    check(screen_end(screen) == -1, "killed");
    screen = begin("killed", 24, 80);
    bool older = false; /* never younger than it was: its age goes on from 3 s */
    for (int row = 0; row < 24; row++)
        older |= strstr(screen_row(screen, row), "gas in abdomen  0:00:00") != NULL;
    screen_check(screen, !older && screen_shows(screen, "gas in abdomen  0:00:0"),
                 "it runs on after a kill, with the age it has");
    list_marks("killed", after);
    check(strcmp(before, after) == 0, "its begin did not move");
    screen_type(screen, "g");
    screen_check(screen, screen_shows(screen, "gas in abdomen for "), "and the same key ends it");
    leave(screen, "leaving after a kill");
}

int main(void)
{
    char command[LINE_SIZE], out[TEXT_SIZE];
    program = getenv("INCISURA_ASAN");
    if (!program || !mkdtemp(folder))
        return 2;
    (void)snprintf(command, sizeof command, "%s/state", folder);
    (void)setenv("XDG_STATE_HOME", command, 1);
    stamps_and_spans();
    values();
    notes_and_clocks();
    taking_back();
    sizes();
    second_session();
    review_beside();
    ends_by_signal(SIGTERM, "SIGTERM");
    ends_by_signal(SIGHUP, "SIGHUP");
    stops_and_goes_on();
    deaf_terminal();
    goes_on_after_a_kill();
    (void)snprintf(command, sizeof command, "find . -name '*.lines' | wc -l");
    (void)run(command, out, sizeof out);
    check(atoi(out) == 0, "nothing is left in the second place");
    (void)snprintf(command, sizeof command, "rm -r %s", folder);
    return system(command) != 0 || screen_result();
}
