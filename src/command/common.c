/*
 * common.c - what several commands do: failing, opening what is named first, showing progress.
 */
#include <pthread.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

#include "base/str.h"
#include "case/live_case.h"
#include "command/command.h"
#include "store/second_place.h"

int command_fail(const struct arguments *arguments, const struct err *err)
{
    (void)fprintf(stderr, "incisura %s: %s\n", arguments->command->name, err->text);
    return EXIT_FAILED;
}

static const double rate_least_hz = 0.001, rate_most_hz = 1e6;

int command_reader_options(const struct arguments *arguments, struct reader_options *out,
                           struct err *err)
{
    struct reader_options made = {0};
    const char *rate = argument(arguments, "rate");
    if (rate && (!number_parse(rate, &made.rate_hz) ||
                 !(made.rate_hz >= rate_least_hz && made.rate_hz <= rate_most_hz)))
        return err_set(err, ERR_USAGE, "--rate '%s' is not a number of samples a second", rate);
    const char *start = argument(arguments, "start");
    struct time_arg time;
    if (start && (!iso_parse(start, &time) || time.kind != TIME_ARG_CIVIL))
        return err_set(err, ERR_USAGE,
                       "--start '%s' is not a date and time of the theatre's wall clock: "
                       "2031-05-20T09:00:00",
                       start);
    made.start_civil_ns = start ? time.ns : 0;
    made.units = argument_all(arguments, "unit", &made.unit_count);
    made.roles = argument_all(arguments, "role", &made.role_count);
    *out = made;
    return ERR_OK;
}

/* args[0], or that with ".case" when only such a file exists. */
static int named_path(const struct arguments *arguments, struct str *path, struct err *err)
{
    const char *name = arguments->args[0];
    str_put(path, name);
    if (access(name, F_OK) != 0 && !path_has_suffix(name, ".case"))
        str_put(path, ".case");
    if (str_failed(path))
        return err_memory(err, name);
    if (access(str_text(path), F_OK) != 0)
        return err_set(err, ERR_IO, "%s: no such case or recording; check the name", name);
    return ERR_OK;
}

static void tell_newer(const struct arguments *arguments, const struct store *store)
{
    if (store && store_newer(store))
        (void)fprintf(
            stderr,
            "incisura %s: note: %s was made by a newer program; it is read as far as this "
            "one understands it, and not changed\n",
            arguments->command->name, store_path(store));
}

/* Before a case is changed, what earlier live sessions left comes in: marks that could not be saved
 * then, and streams that a crash left open. That it cannot be now is no reason not to go on. */
static void settle(const struct arguments *arguments, const char *path, int64_t most_bytes)
{
    struct store *store = NULL;
    struct settled settled = {0};
    struct err why = {0};
    const char *command = arguments->command->name;
    if (store_open(path, STORE_WRITE, argument(arguments, "rater"), &store, NULL))
        return; /* opening it next says why */
    if (live_case_settle(store, most_bytes, &settled, &why))
        (void)fprintf(stderr,
                      "incisura %s: note: what a live session left could not be brought in: "
                      "%s\n",
                      command, why.text);
    if (settled.changes > 0)
        (void)fprintf(stderr,
                      "incisura %s: note: %lld changes of marks that could not be saved then "
                      "were brought in from the second place\n",
                      command, (long long)settled.changes);
    if (settled.damaged > 0)
        (void)fprintf(stderr,
                      "incisura %s: note: %lld lines of the second place are damaged; they "
                      "are kept there as .damaged\n",
                      command, (long long)settled.damaged);
    if (settled.recordings > 0)
        (void)fprintf(stderr,
                      "incisura %s: note: attached what streamed in before: %lld recording%s\n",
                      command, (long long)settled.recordings, settled.recordings == 1 ? "" : "s");
    if (settled.strays > 0)
        (void)fprintf(
            stderr,
            "incisura %s: note: %lld file%s named like a stream of this case %s not in it; "
            "`incisura inspect` tells what is in there, `attach` adds it\n",
            command, (long long)settled.strays, settled.strays == 1 ? "" : "s",
            settled.strays == 1 ? "is" : "are");
    store_close(store);
}

/* Streams of sessions that were killed: attached by the next program that writes. */
static size_t streams_waiting(struct store *store)
{
    struct arena arena = {0};
    struct stored_stream *streams;
    size_t count, waiting = 0;
    if (store_streams(store, &arena, &streams, &count, NULL))
        count = 0;
    for (size_t i = 0; i < count; i++) {
        bool runs;
        waiting += store_session_runs(store, streams[i].session, &runs, NULL) == ERR_OK && !runs;
    }
    arena_free(&arena);
    return waiting;
}

/* A program that only reads says what is missing. */
static void tell_waiting(const struct arguments *arguments, struct store *store)
{
    int64_t files = 0;
    if (store && second_place_count(store, &files, NULL) == ERR_OK && files > 0)
        (void)fprintf(
            stderr,
            "incisura %s: note: marks of %s wait in the second place; `incisura review` or "
            "`live` brings them in\n",
            arguments->command->name, store_path(store));
    size_t streams = store ? streams_waiting(store) : 0;
    if (streams > 0)
        (void)fprintf(stderr,
                      "incisura %s: note: %zu streamed recording%s of %s %s not attached yet; "
                      "`incisura review` or `live` does it\n",
                      arguments->command->name, streams, streams == 1 ? "" : "s", store_path(store),
                      streams == 1 ? "is" : "are");
}

int command_open_live(const struct arguments *arguments, int64_t most_bytes, struct casefile **out,
                      struct err *err)
{
    struct str path = {0};
    int failed = named_path(arguments, &path, err);
    if (!failed) {
        settle(arguments, str_text(&path), most_bytes);
        failed = casefile_open(str_text(&path), STORE_WRITE, argument(arguments, "rater"), NULL,
                               out, err);
    }
    str_free(&path);
    return failed;
}

int command_open(const struct arguments *arguments, enum store_mode mode, struct casefile **out,
                 struct err *err)
{
    struct reader_options options;
    struct str path = {0};
    int failed = command_reader_options(arguments, &options, err);
    if (!failed)
        failed = named_path(arguments, &path, err);
    if (!failed && mode == STORE_WRITE)
        settle(arguments, str_text(&path), INT64_MAX);
    if (!failed)
        failed =
            casefile_open(str_text(&path), mode, argument(arguments, "rater"), &options, out, err);
    if (!failed) {
        tell_newer(arguments, casefile_store(*out));
        tell_waiting(arguments, mode == STORE_READ ? casefile_store(*out) : NULL);
    }
    str_free(&path);
    return failed;
}

int command_open_store(const struct arguments *arguments, struct store **out, struct err *err)
{
    struct str path = {0};
    int failed = named_path(arguments, &path, err);
    if (!failed)
        failed = store_open(str_text(&path), STORE_READ, NULL, out, err);
    if (!failed) {
        tell_newer(arguments, *out);
        tell_waiting(arguments, *out);
    }
    str_free(&path);
    return failed;
}

/* The job that ^C stops: it puts away what it has half done and ends with one line. A second ^C
 * ends the program at once. */
static struct progress *_Atomic interruptible;

static void on_interrupt(int number)
{
    (void)number;
    struct progress *progress = atomic_load(&interruptible);
    if (progress)
        atomic_store(&progress->cancelled, true);
}

static void let_interrupt(struct progress *progress)
{
    static const int signals[] = {SIGINT, SIGTERM};
    struct sigaction action = {.sa_handler = progress ? on_interrupt : SIG_DFL,
                               .sa_flags = progress ? (int)SA_RESETHAND : 0};
    atomic_store(&interruptible, progress);
    (void)sigemptyset(&action.sa_mask);
    for (size_t i = 0; i < sizeof signals / sizeof *signals; i++)
        (void)sigaction(signals[i], &action, NULL);
}

struct progress_line {
    const char *what;
    struct progress *progress;
    pthread_t thread;
    atomic_bool stop;
};

/* Quiet for the first second: most jobs are done by then. */
static void *show(void *context)
{
    struct progress_line *line = context;
    bool shown = false;
    for (int tick = 0; !atomic_load(&line->stop); tick++) {
        (void)nanosleep(&(struct timespec){0, 50 * NS_PER_MS}, NULL);
        int64_t total = atomic_load(&line->progress->total);
        int64_t done = atomic_load(&line->progress->done);
        if (tick < 20 || tick % 4 != 0 || total <= 0)
            continue;
        (void)fprintf(stderr, "\r%s %3d %%", line->what, (int)mul_div(done, 100, total));
        shown = true;
    }
    if (shown)
        (void)fprintf(stderr, "\r\033[K");
    return NULL;
}

struct progress_line *progress_line_begin(const char *what, struct progress *progress)
{
    let_interrupt(progress);
    if (!isatty(STDERR_FILENO))
        return NULL;
    struct progress_line *line = calloc(1, sizeof *line);
    if (!line)
        return NULL;
    line->what = what;
    line->progress = progress;
    if (pthread_create(&line->thread, NULL, show, line) != 0) {
        free(line);
        return NULL;
    }
    return line;
}

void progress_line_end(struct progress_line *line)
{
    let_interrupt(NULL);
    if (!line)
        return;
    atomic_store(&line->stop, true);
    (void)pthread_join(line->thread, NULL);
    free(line);
}
