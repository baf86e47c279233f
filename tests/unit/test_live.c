/*
 * test_live.c - the live model without a terminal: events and ticks in, the store and the canvas
 * afterwards. Its clocks are the test's: the wall clock is set while it runs, the machine is
 * started again between two sessions.
 */
#include <criterion/criterion.h>

#include <math.h>
#include <sqlite3.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <time.h>
#include <unistd.h>

#include "base/machine.h"
#include "base/str.h"
#include "case/live_case.h"
#include "terminal/live.h"

static const char codebook[] = "code,label,key,kind,unit,class,timer\n"
                               "incision,incision,c,point,,surgery,yes\n"
                               "gas,gas in abdomen,g,span,,surgery,\n"
                               "propofol,propofol,p,dose,mg,induction,\n"
                               "propofol-rate,infusion,P,rate,mg/h,induction,\n"
                               "sync,clock sync,Y,sync,,monitoring,\n"
                               "remark,remark,n,note,,,\n";

enum { ROWS = 24, COLUMNS = 100, PAUSE_MS = 5 };

static char folder[] = "/tmp/incisura-live-XXXXXX";
static char path[64];

static void set_up(void)
{
    const struct case_header header = {.subject = "S-1",
                                       .procedure = "hernia repair",
                                       .rater = "KM",
                                       .codebook_text = codebook,
                                       .codebook_size = sizeof codebook - 1,
                                       .epoch_civil_ns = NS_NONE};
    struct err err = {0};
    cr_assert_not_null(mkdtemp(folder));
    (void)snprintf(path, sizeof path, "%s/S-1.case", folder);
    cr_assert_eq(setenv("XDG_STATE_HOME", folder, 1), 0);
    cr_assert_eq(store_create(path, &header, &err), 0, "%s", err.text);
}

static void tear_down(void)
{
    char command[96];
    (void)snprintf(command, sizeof command, "rm -rf %s", folder);
    cr_expect_eq(system(command), 0);
}

TestSuite(live, .init = set_up, .fini = tear_down);

/* A session as `live` begins it, without streams; its clocks go on only as the test says. */
struct at_work {
    struct casefile *casefile;
    struct saver *saver;
    struct live_session session;
    struct live *live;
    struct canvas canvas;
    char remark[320];
    int64_t boottime_ns, utc_ns;
};

static struct at_work begin(void)
{
    struct at_work made = {.boottime_ns = boottime_now_ns(), .utc_ns = utc_now_ns()};
    struct err err = {0};
    cr_assert_eq(casefile_open(path, STORE_WRITE, NULL, NULL, &made.casefile, &err), 0, "%s",
                 err.text);
    struct store *store = casefile_store(made.casefile);
    cr_assert_eq(live_case_session(made.casefile, "KM", &made.session, made.remark,
                                   sizeof made.remark, &err),
                 0, "%s", err.text);
    cr_assert_eq(store_session_begin(store, &made.session, false, &err), 0, "%s", err.text);
    cr_assert_eq(saver_start(store, &made.session, PAUSE_MS, &made.saver, &err), 0, "%s", err.text);
    cr_assert_eq(casefile_release_store(made.casefile), store);
    return made;
}

/* The screen of a session that stays where it is. */
static void look_on(struct at_work *work)
{
    struct err err = {0};
    struct live_setup setup = {.casefile = work->casefile,
                               .procedure = "hernia repair",
                               .session = &work->session,
                               .saver = work->saver,
                               .remark = work->remark};
    cr_assert_eq(live_new(&setup, &work->live, &err), 0, "%s", err.text);
    cr_assert_eq(live_resize(work->live, ROWS, COLUMNS, &err), 0);
    cr_assert_eq(canvas_resize(&work->canvas, ROWS, COLUMNS, &err), 0);
    live_tick(work->live, work->boottime_ns, work->utc_ns);
}

static void end(struct at_work *work)
{
    struct store *store = NULL;
    struct err err = {0};
    live_free(work->live);
    canvas_free(&work->canvas);
    cr_expect_eq(saver_stop(work->saver, 5000, &store, &err), 0, "%s", err.text);
    store_close(store);
    casefile_close(work->casefile);
}

static void later(struct at_work *work, int64_t span_ns)
{
    work->boottime_ns += span_ns;
    work->utc_ns += span_ns;
    live_tick(work->live, work->boottime_ns, work->utc_ns);
}

static void press(struct at_work *work, uint32_t key)
{
    live_event(work->live, &(struct event){.kind = EVENT_KEY,
                                           .key = key,
                                           .boottime_ns = work->boottime_ns,
                                           .utc_ns = work->utc_ns});
}

static void type(struct at_work *work, const char *text)
{
    while (*text)
        press(work, utf8_next(&text));
}

/* Is the text in a row of the screen as it is now? */
static bool shows(struct at_work *work, const char *text)
{
    live_draw(work->live, &work->canvas);
    for (int row = 0; row < ROWS; row++) {
        char line[4 * COLUMNS + 1];
        size_t at = 0;
        for (int column = 0; column < COLUMNS; column++) {
            uint32_t glyph = work->canvas.cells[row * COLUMNS + column].glyph;
            at += utf8_put(line + at, glyph ? glyph : ' ');
        }
        line[at] = '\0';
        if (strstr(line, text))
            return true;
    }
    return false;
}

/* Waits for the saver's thread; the model's clocks stand still. */
static bool comes(struct at_work *work, const char *text)
{
    for (int i = 0; i < 3000 && !shows(work, text); i++) {
        (void)nanosleep(&(struct timespec){0, 5 * NS_PER_MS}, NULL);
        live_tick(work->live, work->boottime_ns, work->utc_ns);
    }
    return shows(work, text);
}

static int64_t case_ns(const struct at_work *work)
{
    return work->boottime_ns + work->session.case_minus_boottime_ns;
}

/* ---- clocks ---- */

static void wall_clock_steps(int64_t step_ns, const char *said)
{
    struct at_work work = begin();
    look_on(&work);
    type(&work, "c");
    int64_t first = case_ns(&work);
    later(&work, 10 * NS_PER_S);
    work.utc_ns += step_ns;
    later(&work, NS_PER_S);
    cr_expect(shows(&work, said), "the step is told");
    type(&work, "g");
    int64_t second = case_ns(&work);
    work.utc_ns -= step_ns;
    later(&work, 30 * NS_PER_S);
    type(&work, "g");
    cr_assert_eq(live_mark_count(work.live), 2);
    cr_expect_eq(live_mark(work.live, 0)->onset_ns, first);
    cr_expect_eq(live_mark(work.live, 1)->onset_ns, second);
    cr_expect_eq(second - first, 11 * NS_PER_S, "by the clock that nobody sets");
    cr_expect_eq(live_mark(work.live, 1)->until_ns - second, 30 * NS_PER_S);
    cr_expect_eq(live_mark(work.live, 1)->stamp_utc_ns - live_mark(work.live, 0)->stamp_utc_ns,
                 11 * NS_PER_S + step_ns, "what the wall clock said is kept");
    cr_expect(comes(&work, "SAVED"));
    end(&work);
}

Test(live, no_mark_moves_when_the_wall_clock_is_put_back)
{
    wall_clock_steps(-NS_PER_HOUR, "wall clock was set by -3600 s");
}

Test(live, no_mark_moves_when_the_wall_clock_is_put_forward)
{
    wall_clock_steps(NS_PER_HOUR, "wall clock was set by +3600 s");
}

/* Keys that waited in a pipe have stamps of their own, older than the last tick. */
Test(live, a_key_counts_from_its_own_instant)
{
    struct at_work work = begin();
    look_on(&work);
    int64_t then = case_ns(&work);
    struct event event = {
        .kind = EVENT_KEY, .key = 'c', .boottime_ns = work.boottime_ns, .utc_ns = work.utc_ns};
    later(&work, 20 * NS_PER_S);
    live_event(work.live, &event);
    later(&work, 0);
    cr_expect_eq(live_mark(work.live, 0)->onset_ns, then);
    cr_expect(shows(&work, "last mark 0:00:20"));
    end(&work);
}

/* Ends a session, and makes the store believe that it was another boot of this machine. */
static void boot_again(struct at_work *work)
{
    sqlite3 *db = NULL;
    end(work);
    cr_assert_eq(sqlite3_open(path, &db), SQLITE_OK);
    cr_assert_eq(sqlite3_exec(db,
                              "UPDATE sessions SET boot_id = 'another', "
                              "case_minus_boottime_ns = case_minus_boottime_ns + 123456789000000",
                              NULL, NULL, NULL),
                 SQLITE_OK);
    cr_assert_eq(sqlite3_close(db), SQLITE_OK);
}

Test(live, a_machine_that_was_started_again_is_tied_by_its_wall_clock)
{
    struct at_work work = begin();
    look_on(&work);
    type(&work, "c");
    cr_expect_eq(live_mark(work.live, 0)->error_ns, 0);
    int64_t before = case_ns(&work);
    boot_again(&work);
    work = begin();
    look_on(&work);
    cr_expect(shows(&work, "this machine was started again"), "the tie is told");
    cr_expect_eq(work.session.tie_error_ns, NS_PER_S);
    type(&work, "c");
    cr_expect_eq(live_mark(work.live, 0)->error_ns, NS_PER_S, "marks carry its error");
    int64_t since = live_mark(work.live, 0)->onset_ns - before;
    cr_expect(since >= 0 && since < 60 * NS_PER_S, "case time goes on: %lld", (long long)since);
    type(&work, "10c");
    cr_expect_eq(live_mark(work.live, 1)->error_ns, (int64_t)hypot(2.5e9, 1e9),
                 "and that of saying how long ago");
    end(&work);
    work = begin();
    look_on(&work);
    cr_expect_eq(work.session.tie_error_ns, NS_PER_S, "a third session of this boot has it too");
    end(&work);
}

Test(live, the_next_session_of_a_boot_goes_on_with_its_clock)
{
    struct at_work work = begin();
    look_on(&work);
    int64_t tie = work.session.case_minus_boottime_ns;
    end(&work);
    work = begin();
    cr_expect_eq(work.session.case_minus_boottime_ns, tie, "whatever the wall clock says by now");
    cr_expect_str_eq(work.remark, "");
    end(&work);
}

/* ---- marks ---- */

Test(live, a_span_never_ends_before_it_begins)
{
    struct at_work work = begin();
    look_on(&work);
    type(&work, "g");
    later(&work, 5 * NS_PER_S);
    type(&work, "60g");
    cr_assert_eq(live_mark_count(work.live), 1);
    cr_expect_eq(live_mark(work.live, 0)->until_ns, live_mark(work.live, 0)->onset_ns);
    end(&work);
}

Test(live, taking_back_goes_backwards_over_what_was_done)
{
    struct at_work work = begin();
    look_on(&work);
    type(&work, "gcg");
    int64_t until = live_mark(work.live, 0)->until_ns;
    later(&work, NS_PER_S);
    press(&work, KEY_IS_BACKSPACE);
    cr_expect_eq(live_mark(work.live, 0)->until_ns, NS_NONE);
    cr_expect_eq(live_mark(work.live, 1)->state, MARK_MARKED);
    press(&work, KEY_IS_BACKSPACE);
    cr_expect_eq(live_mark(work.live, 1)->state, MARK_REJECTED);
    press(&work, KEY_IS_BACKSPACE);
    cr_expect_eq(live_mark(work.live, 0)->state, MARK_REJECTED);
    type(&work, "=");
    cr_expect_neq(live_mark(work.live, 0)->state, MARK_REJECTED);
    type(&work, "==");
    cr_expect_eq(live_mark(work.live, 1)->state, MARK_MARKED);
    cr_expect_eq(live_mark(work.live, 0)->until_ns, until, "the end as it was");
    type(&work, "=");
    cr_expect(shows(&work, "nothing of this session was taken back"));
    end(&work);
}

/* Another program rejects a mark of this session: shown, and not put back here. */
Test(live, what_others_reject_is_theirs)
{
    struct at_work work = begin();
    look_on(&work);
    type(&work, "cc");
    cr_assert(comes(&work, "2 marks   SAVED"));
    struct store *other = NULL;
    struct err err = {0};
    const struct mark *marks;
    size_t count;
    cr_assert_eq(store_open(path, STORE_WRITE, "NN", &other, &err), 0, "%s", err.text);
    cr_assert_eq(store_marks(other, &marks, &count, &err), 0);
    struct mark mark = marks[0];
    mark.state = MARK_REJECTED;
    cr_assert_eq(store_mark_change(other, &mark, "", &err), 0, "%s", err.text);
    store_close(other);
    cr_expect(comes(&work, "1 mark   SAVED"));
    type(&work, "=");
    cr_expect(shows(&work, "nothing of this session was taken back"));
    press(&work, KEY_IS_BACKSPACE);
    cr_expect(comes(&work, "0 marks   SAVED"));
    end(&work);
}

Test(live, an_infusion_says_what_it_has_given)
{
    struct at_work work = begin();
    look_on(&work);
    type(&work, "P");
    type(&work, "120");
    press(&work, KEY_IS_ENTER);
    later(&work, 30 * 60 * NS_PER_S);
    cr_expect(shows(&work, "infusion 120 mg/h  0:30:00  60 mg given"));
    type(&work, "P0");
    press(&work, KEY_IS_ENTER);
    cr_expect(shows(&work, "nothing"), "0 ends it");
    end(&work);
}

/* ---- streams that were left ---- */

Test(live, a_stream_that_cannot_be_taken_in_keeps_no_other_out)
{
    struct store *store = NULL;
    struct err err = {0};
    struct arena arena = {0};
    struct stored_stream *left;
    size_t count = 0;
    int64_t attached = 0;
    char unreadable[96], gone[96];
    (void)snprintf(unreadable, sizeof unreadable, "%s/S-1-live-1.bdf", folder);
    (void)snprintf(gone, sizeof gone, "%s/S-1-live-2.bdf", folder);
    cr_assert_eq(mkdir(unreadable, 0700), 0, "a folder cannot be read as a file");
    cr_assert_eq(store_open(path, STORE_WRITE, "KM", &store, &err), 0, "%s", err.text);
    const char *paths[] = {unreadable, gone};
    for (int i = 0; i < 2; i++) {
        struct stored_stream stream = {paths[i], "a session", "tcp:x:1", ""};
        cr_assert_eq(store_stream_keep(store, &stream, &err), 0, "%s", err.text);
    }
    cr_expect_neq(live_case_adopt(store, INT64_MAX, &attached, &err), 0);
    cr_expect(strstr(err.text, "S-1-live-1.bdf"), "%s", err.text);
    cr_assert_eq(store_streams(store, &arena, &left, &count, &err), 0);
    cr_assert_eq(count, 1, "the one that is gone is forgotten");
    cr_expect_str_eq(left[0].path, unreadable);
    arena_free(&arena);
    store_close(store);
}
