/*
 * cmd_live.c - `live`: a session in theatre, from opening the case to attaching what streamed in.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "base/array.h"
#include "base/str.h"
#include "case/live_case.h"
#include "command/command.h"
#include "terminal/live.h"

/* How long leaving waits for a disk that does not take it, and what a start takes in at once. */
enum { LEAVE_WAIT_MS = 3000 };
static const int64_t adopt_at_start_bytes = 256 << 20;

static const struct option_spec live_options[] = {
    OPTION_RATER,
    {"rate", "HZ", false, "samples a second, for streamed lines without a time column"},
    {"take-over", NULL, false, "begin although a session of another machine has not ended"},
    {0},
};

/* Everything that is open during a session. */
struct at_work {
    struct casefile *casefile;
    struct store *store; /* until the saver has it */
    struct saver *saver;
    struct live_session session;
    struct live_stream **streams; /* shape (stream_count) */
    size_t stream_count;
    struct arena arena;
    const char *procedure;
    struct mark *marks;
    size_t mark_count;
    char remark[320];
};

static int check_sources(const struct arguments *arguments, struct err *err)
{
    size_t from_stdin = 0;
    for (size_t i = 1; i < arguments->count; i++)
        from_stdin += strcmp(arguments->args[i], "-") == 0;
    if (from_stdin > 1)
        return err_set(err, ERR_USAGE, "'-' can be a source once");
    if (!isatty(STDOUT_FILENO) || (from_stdin == 0 && !isatty(STDIN_FILENO)))
        return err_set(err, ERR_USAGE, "needs a terminal to show and to take keys");
    return ERR_OK;
}

/* The session is in the case before the first key, unless the case cannot be written just now: then
 * the saver goes on trying, as for every mark. */
static int begin_session(const struct arguments *arguments, struct at_work *work, struct err *err)
{
    const char *rater = argument(arguments, "rater");
    struct err why = {0};
    work->store = casefile_store(work->casefile);
    int failed = live_case_session(work->casefile,
                                   rater && *rater ? rater : store_header(work->store)->rater,
                                   &work->session, work->remark, sizeof work->remark, err);
    if (failed)
        return failed;
    failed = store_session_begin(work->store, &work->session, argument_flag(arguments, "take-over"),
                                 &why);
    if (failed == ERR_CONFLICT || failed == ERR_READ_ONLY || failed == ERR_NEWER)
        return err_set(err, failed, "%s", why.text);
    if (failed)
        (void)snprintf(work->remark, sizeof work->remark, "%.300s", why.text);
    return ERR_OK;
}

/* What the screen shows from the start; the store is the saver's from then on. */
static int take_marks(struct at_work *work, struct err *err)
{
    const struct mark *marks;
    int failed = store_marks(work->store, &marks, &work->mark_count, err);
    work->procedure = arena_string(&work->arena, store_header(work->store)->procedure);
    if (!failed && !work->procedure)
        failed = err_memory(err, "a case");
    return failed ? failed : marks_copy(marks, work->mark_count, &work->arena, &work->marks, err);
}

static int start_streams(const struct arguments *arguments, struct at_work *work, struct err *err)
{
    struct reader_options options;
    void *streams = NULL;
    int failed = command_reader_options(arguments, &options, err);
    char *here = failed ? NULL : path_beside(casefile_path(work->casefile), ".");
    char *folder = here ? realpath(here, NULL) : NULL;
    if (!failed && !folder)
        failed =
            err_set(err, ERR_IO, "%s: its folder cannot be found", casefile_path(work->casefile));
    if (!failed)
        failed = array_new_zero(&streams, arguments->count, sizeof *work->streams, err);
    work->streams = streams;
    for (size_t i = 1; i < arguments->count && !failed; i++) {
        struct live_stream_config config = {
            .source = arguments->args[i],
            .rate_hz = options.rate_hz,
            .folder = folder,
            .stem = casefile_name(work->casefile),
            .subject = store_header(work->store)->subject,
            .case_minus_boottime_ns = work->session.case_minus_boottime_ns,
            .civil_minus_boottime_ns = work->session.case_minus_boottime_ns,
        };
        if (work->session.epoch_civil_ns != NS_NONE)
            config.civil_minus_boottime_ns += work->session.epoch_civil_ns;
        failed = live_stream_start(&config, &work->streams[work->stream_count], err);
        work->stream_count += !failed;
    }
    free(here);
    free(folder);
    return failed;
}

static int open_all(const struct arguments *arguments, struct at_work *work, struct err *err)
{
    int failed = check_sources(arguments, err);
    if (!failed)
        failed = command_open_live(arguments, adopt_at_start_bytes, &work->casefile, err);
    if (!failed)
        failed = begin_session(arguments, work, err);
    if (!failed)
        failed = take_marks(work, err);
    if (!failed && arguments->count > 1)
        failed = casefile_overviews(work->casefile, 1, err);
    if (!failed)
        failed = start_streams(arguments, work, err);
    if (!failed)
        failed = saver_start(work->store, &work->session, SAVER_PAUSE_MS, &work->saver, err);
    if (!failed)
        work->store = casefile_release_store(work->casefile);
    return failed;
}

static int run_screen(const struct arguments *arguments, struct at_work *work, struct err *err)
{
    bool from_stdin = false;
    for (size_t i = 1; i < arguments->count; i++)
        from_stdin = from_stdin || strcmp(arguments->args[i], "-") == 0;
    struct live_setup setup = {
        .casefile = work->casefile,
        .procedure = work->procedure,
        .session = &work->session,
        .saver = work->saver,
        .streams = work->streams,
        .sources = arguments->args + 1,
        .stream_count = work->stream_count,
        .marks = work->marks,
        .mark_count = work->mark_count,
        .remark = work->remark,
    };
    return live_run(&setup, from_stdin, err);
}

/* ---- leaving ---- */

/* Keeps the first error, tells the others: one line for each thing that went wrong. */
static void also(const struct arguments *arguments, int failed, const struct err *err, int *first)
{
    if (failed)
        *first = command_fail(arguments, err);
}

static void stop_streams(const struct arguments *arguments, struct at_work *work, int *status)
{
    for (size_t i = 0; i < work->stream_count; i++) {
        struct err err = {0};
        int failed = live_stream_stop(work->streams[i], LEAVE_WAIT_MS, &err);
        also(arguments, failed, &err, status);
        failed = work->saver
                     ? live_case_keep(work->saver, work->streams[i], arguments->args[i + 1], &err)
                     : ERR_OK;
        also(arguments, failed, &err, status);
    }
}

static void attach_streams(const struct arguments *arguments, struct at_work *work, int *status)
{
    int64_t attached = 0;
    struct err err = {0};
    int failed = live_case_adopt(work->store, INT64_MAX, &attached, &err);
    also(arguments, failed, &err, status);
    if (attached > 0)
        (void)fprintf(stderr, "%lld recording%s attached; next: incisura review %s\n",
                      (long long)attached, attached == 1 ? "" : "s", arguments->args[0]);
}

/* Everything is put away whatever went wrong: streams first, then marks, then what is left. */
static int close_all(const struct arguments *arguments, struct at_work *work, int status)
{
    stop_streams(arguments, work, &status);
    if (work->saver) {
        struct err err = {0};
        int failed = saver_stop(work->saver, LEAVE_WAIT_MS, &work->store, &err);
        also(arguments, failed, &err, &status);
        attach_streams(arguments, work, &status);
        store_close(work->store);
    } else if (work->store) {
        /* Never got so far; a session left open would be ended at the next start. */
        int ended = store_session_end(work->store, work->session.uid, NULL);
        (void)ended;
    }
    for (size_t i = 0; i < work->stream_count; i++)
        live_stream_free(work->streams[i]);
    free(work->streams);
    casefile_close(work->casefile);
    arena_free(&work->arena);
    return status;
}

static int run_live(const struct arguments *arguments)
{
    struct at_work work = {0};
    struct err err = {0};
    int failed = open_all(arguments, &work, &err);
    if (!failed)
        failed = run_screen(arguments, &work, &err);
    return close_all(arguments, &work, failed ? command_fail(arguments, &err) : EXIT_DONE);
}

const struct command command_live = {
    .name = "live",
    .args = "CASE [SOURCE...]",
    .least = 1,
    .most = 9,
    .summary = "stamp what happens in theatre, with or without live traces",
    .detail =
        "Letters of the case's codebook stamp their events at once, digits before a letter say "
        "how many seconds ago; ? shows every key. Each mark is saved before anything is "
        "asked about it; while the case cannot be written, marks go to a second place "
        "($XDG_STATE_HOME/incisura, else ~/.local/state/incisura) and come in by themselves "
        "at the next start. One session a case at a time; `incisura review` may be open "
        "beside it.\n\n"
        "SOURCE streams traces in: `incisura help sources`. What comes is written beside the "
        "case as CASE-live-1.bdf and so on, and attached on leaving, its clock fitted to the "
        "laptop's.\n\n"
        "Research software: not a monitor. The traces may be late, wrong or gone.",
    .options = live_options,
    .run = run_live,
};
