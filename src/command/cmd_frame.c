/*
 * cmd_frame.c - `frame` prints the review screen as text: for pipes, documents and tests.
 */
#include <stdio.h>
#include <string.h>

#include "command/command.h"
#include "terminal/review.h"

enum { COLUMNS_MOST = 1000, ROWS_MOST = 500 };

static const struct option_spec frame_options[] = {
    {"size", "COLUMNSxROWS", false, "of the screen; default 80x24"},
    {"at", "TIME", false, "left edge and cursor; default: the start of the case"},
    {"width", "DURATION", false, "how much time is shown: 10s, 250ms, 2min, 8h; default 10s"},
    {"ansi", NULL, false, "with colours, as terminal sequences"},
    OPTION_RATE,
    OPTION_UNIT,
    OPTION_ROLE,
    {0},
};

struct frame_request {
    int rows, columns;
    int64_t at_ns, width_ns;
    bool ansi;
};

static int read_size(const char *text, struct frame_request *request, struct err *err)
{
    char rest;
    if (text && (sscanf(text, "%4dx%4d%c", &request->columns, &request->rows, &rest) != 2 ||
                 request->columns < 1 || request->columns > COLUMNS_MOST || request->rows < 1 ||
                 request->rows > ROWS_MOST))
        return err_set(err, ERR_USAGE, "--size '%s' is not COLUMNSxROWS, such as 200x60", text);
    return ERR_OK;
}

static int read_request(const struct arguments *arguments, const struct casefile *casefile,
                        struct frame_request *request, struct err *err)
{
    int64_t to_ns;
    *request = (struct frame_request){.rows = 24, .columns = 80, .width_ns = 10 * NS_PER_S};
    casefile_extent(casefile, &request->at_ns, &to_ns);
    request->ansi = argument_flag(arguments, "ansi");
    const char *at = argument(arguments, "at"), *width = argument(arguments, "width");
    int failed = read_size(argument(arguments, "size"), request, err);
    if (!failed && at)
        failed = casefile_time(casefile, at, &request->at_ns, err);
    if (!failed && width)
        failed = duration_parse(width, &request->width_ns, err);
    if (!failed && request->width_ns <= 0)
        failed = err_set(err, ERR_USAGE, "--width '%s' shows nothing; 10s, 250ms, 8h", width);
    return failed;
}

/* Follows the builders of all overviews, for the line on the terminal. */
static void wait_for_overviews(const struct casefile *casefile)
{
    struct progress progress = {0};
    struct progress_line *line = progress_line_begin("overview", &progress);
    for (size_t i = 0; i < casefile_recording_count(casefile); i++) {
        struct overview *overview = casefile_recording(casefile, i)->overview;
        if (!overview)
            continue;
        progress_total(&progress, (int64_t)casefile_recording_count(casefile));
        overview_wait(overview);
        progress_add(&progress, 1);
    }
    progress_line_end(line);
}

static int draw(struct casefile *casefile, const struct frame_request *request,
                struct review *review, struct canvas *canvas, struct err *err)
{
    int failed = review_resize(review, request->rows, request->columns, err);
    if (!failed)
        failed = canvas_resize(canvas, request->rows, request->columns, err);
    if (failed)
        return failed;
    review_look(review, request->at_ns, request->width_ns, false);
    review_draw(review, canvas);
    if (!review_waits(review))
        return ERR_OK;
    /* So long a stretch needs the overviews: printed once, it should be whole. */
    failed = casefile_overviews(casefile, 2, err);
    if (failed)
        return failed;
    wait_for_overviews(casefile);
    review_draw(review, canvas);
    return ERR_OK;
}

static int print(const struct canvas *canvas, bool ansi, struct err *err)
{
    struct str text = {0};
    canvas_print(canvas, ansi, &text);
    int failed = str_failed(&text) ? err_memory(err, "the frame") : ERR_OK;
    if (!failed && (fputs(str_text(&text), stdout) == EOF || fflush(stdout) == EOF))
        failed = err_errno(err, "standard output", "write");
    str_free(&text);
    return failed;
}

static int run_frame(const struct arguments *arguments)
{
    struct err err = {0};
    struct casefile *casefile = NULL;
    struct review *review = NULL;
    struct canvas canvas = {0};
    struct frame_request request = {0};
    int failed = command_open(arguments, STORE_READ, &casefile, &err);
    if (!failed)
        failed = read_request(arguments, casefile, &request, &err);
    if (!failed)
        failed = review_new(casefile, &review, &err);
    if (!failed)
        failed = draw(casefile, &request, review, &canvas, &err);
    if (!failed)
        failed = print(&canvas, request.ansi, &err);
    canvas_free(&canvas);
    review_free(review);
    casefile_close(casefile);
    return failed ? command_fail(arguments, &err) : EXIT_DONE;
}

const struct command command_frame = {
    .name = "frame",
    .args = "CASE|FILE",
    .least = 1,
    .most = 1,
    .summary = "print the review screen as text",
    .detail =
        "Prints what `review` would show at that time, width and size. Also takes a recording "
        "that is in no case.",
    .options = frame_options,
    .run = run_frame,
};
