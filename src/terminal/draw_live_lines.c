/*
 * draw_live_lines.c - the live screen's single lines: title with the state of saving, the loud line
 * when something is not saved, the line that is typed into, and what the keys do.
 */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "terminal/live_impl.h"

/* Marks that stand, and those among them that lack something: an open span lacks nothing yet. */
static void count(const struct live *live, size_t *standing, size_t *incomplete)
{
    *standing = *incomplete = 0;
    for (size_t i = 0; i < live->mark_count; i++) {
        const struct live_mark *mark = &live->marks[i];
        *standing += mark->mark.state != MARK_REJECTED;
        *incomplete += mark->mark.state == MARK_INCOMPLETE && !live_is_open(mark);
    }
}

/* The most important word on the screen. */
static enum ink saving_text(const struct live *live, char *out, size_t size)
{
    int64_t waiting = live->saving.asked - live->saving.saved;
    if (waiting == 0)
        (void)snprintf(out, size, "SAVED");
    else if (live->saving.failing)
        (void)snprintf(out, size, "NOT SAVED %lld", (long long)waiting);
    else
        (void)snprintf(out, size, "saving %lld", (long long)waiting);
    return waiting > 0 && live->saving.failing ? INK_ALARM : INK_BAR;
}

static void draw_title(const struct live *live, struct canvas *canvas)
{
    const struct live_part_place *part = &live->layout.title;
    size_t standing, incomplete;
    count(live, &standing, &incomplete);
    char saving[32], marks[80];
    canvas_fill(canvas, part->row, 0, 1, part->columns, ' ', INK_BAR);
    enum ink ink = saving_text(live, saving, sizeof saving);
    int right = part->columns - 1 - (int)strlen(saving);
    (void)canvas_text(canvas, part->row, right, -1, ink, saving);
    int used = snprintf(marks, sizeof marks, "%zu mark%s", standing, standing == 1 ? "" : "s");
    if (incomplete > 0)
        (void)snprintf(marks + used, sizeof marks - (size_t)used, ", %zu incomplete", incomplete);
    if (right - 3 - (int)strlen(marks) > 12) {
        right -= 3 + (int)strlen(marks);
        (void)canvas_text(canvas, part->row, right, -1, INK_BAR, marks);
    }
    int at =
        canvas_text(canvas, part->row, 1, right - 1, INK_BAR, casefile_name(live->setup.casefile));
    at = canvas_text(canvas, part->row, at + 2, right - 1, INK_BAR, live->setup.procedure);
    (void)canvas_printf(canvas, part->row, at + 2, right - 1, INK_BAR, "rater %s",
                        live->setup.session->rater);
}

/* Why, without the path of the case, which everybody knows here and which takes the line. */
static const char *short_why(const struct live *live)
{
    const char *path = casefile_path(live->setup.casefile), *why = live->saving.why;
    size_t length = strlen(path);
    bool begins = strncmp(why, path, length) == 0 && strncmp(why + length, ": ", 2) == 0;
    return begins ? why + length + 2 : why;
}

/* What cannot be written, first marks, then streams. */
static void draw_alarm(const struct live *live, struct canvas *canvas)
{
    const struct live_part_place *part = &live->layout.alarm;
    const struct saver_status *saving = &live->saving;
    if (part->rows == 0)
        return;
    canvas_fill(canvas, part->row, 0, 1, part->columns, ' ', INK_ALARM);
    if (saving->failing) {
        bool kept = saving->kept >= saving->asked;
        (void)canvas_printf(
            canvas, part->row, 1, part->columns, INK_ALARM, "NOT SAVED %lld, %s: %s%s%s",
            (long long)(saving->asked - saving->saved),
            kept ? "kept in the second place, trying again" : "NOWHERE but here, trying again",
            short_why(live), kept ? "" : "; ", kept ? "" : saving->second_why);
        return;
    }
    for (size_t i = 0; i < live->setup.stream_count; i++) {
        struct live_status status;
        live_stream_status(live->setup.streams[i], &status);
        if (*status.trouble)
            (void)canvas_printf(canvas, part->row, 1, part->columns, INK_ALARM,
                                "RECORDING WAITS, %.0f s in memory: %s",
                                s_from_ns(status.waiting_ns), status.trouble);
    }
}

/* ---- streams ---- */

static enum ink stream_text(const struct live_status *status, char *out, size_t size)
{
    static const char *const words[] = {"connecting", "receiving", "silent", "lost", "ended"};
    int used = snprintf(out, size, "%s", words[status->state]);
    if (*status->text && status->state != LIVE_RECEIVING)
        used += snprintf(out + used, size - (size_t)used, ": %.80s", status->text);
    if (status->gaps > 0)
        used += snprintf(out + used, size - (size_t)used, ", %lld gap%s", (long long)status->gaps,
                         status->gaps == 1 ? "" : "s");
    if (status->garbled > 0)
        used +=
            snprintf(out + used, size - (size_t)used, ", %lld garbled", (long long)status->garbled);
    if (status->dropped > 0)
        used += snprintf(out + used, size - (size_t)used, ", %lld SAMPLES LOST",
                         (long long)status->dropped);
    if (status->state == LIVE_RECEIVING && !isnan(status->drift_ppm))
        (void)snprintf(out + used, size - (size_t)used, ", clock %+.0f ppm", status->drift_ppm);
    return status->dropped > 0 ? INK_ALARM : status->state == LIVE_RECEIVING ? INK_GOOD : INK_WARN;
}

static int draw_streams(const struct live *live, struct canvas *canvas, int row, int at)
{
    for (size_t i = 0; i < live->setup.stream_count; i++) {
        struct live_status status;
        char text[240];
        live_stream_status(live->setup.streams[i], &status);
        enum ink ink = stream_text(&status, text, sizeof text);
        const char *name = live->setup.sources[i];
        at = canvas_printf(canvas, row, at, live->columns, INK_DIM, "%.30s ",
                           strcmp(name, "-") == 0 ? "stdin" : name);
        at = canvas_text(canvas, row, at, live->columns, ink, text) + 2;
    }
    return at;
}

/* ---- the last two lines ---- */

static void draw_prompt(const struct live *live, struct canvas *canvas)
{
    const struct live_part_place *part = &live->layout.prompt;
    if (part->rows == 0)
        return;
    if (live->prompt.open)
        prompt_draw(&live->prompt, canvas, part->row, 0, part->columns);
    else if (live->ago_s >= 0)
        (void)canvas_printf(canvas, part->row, 1, part->columns, INK_STRONG,
                            "%lld s ago: now the event's key   (Esc forgets it)",
                            (long long)live->ago_s);
    else if (*live->said)
        (void)canvas_text(canvas, part->row, 1, part->columns, live->said_ink, live->said);
    else
        (void)draw_streams(live, canvas, part->row, 1);
}

static void draw_hint(const struct live *live, struct canvas *canvas)
{
    const struct live_part_place *part = &live->layout.hint;
    if (part->rows == 0)
        return;
    const char *hint = live->prompt.open
                           ? "Enter keep   Esc later   Tab then a letter: the next event at once"
                           : "? keys  12 letter: 12 s ago  Enter note  Bksp take back  . complete  "
                             "^T sync";
    (void)canvas_text(canvas, part->row, 1, part->columns, INK_DIM, hint);
}

void live_draw_lines(const struct live *live, struct canvas *canvas)
{
    draw_title(live, canvas);
    draw_alarm(live, canvas);
    draw_prompt(live, canvas);
    draw_hint(live, canvas);
}
