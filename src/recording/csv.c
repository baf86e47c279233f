/*
 * csv.c - CSV and TSV files as recordings: columns of numbers laid on time. The text is decoded in
 * csv_columns.c.
 *
 * Rows are evenly spaced when each lies within a period of where it should be (times are often
 * written so coarsely that neighbours share one); a hole of more than one and a half periods is a
 * gap. The period is fitted over the longest stretch and taken as
 * a whole number of samples a second, or of seconds a sample, when that fits as well: times are
 * written with few decimals. Otherwise every column is irregular: a value holds until the next one.
 * So is a column, in an even file, most of whose cells are empty (a monitor's numerics).
 */
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "base/str.h"
#include "dsp/stats.h"
#include "recording/csv_columns.h"
#include "recording/reader.h"

enum { MEDIAN_OF = 4096 };

struct csv {
    struct recording base;
    struct csv_columns columns;
    const float **values; /* of each channel, shape (channel_count) */
    struct run *runs;
    size_t run_count, run_room;
    bool even;
};

static const struct csv *self(const struct recording *recording)
{
    return (const struct csv *)(const void *)recording;
}

static int csv_read(const struct recording *recording, size_t channel, int64_t first, int64_t count,
                    float *out, struct err *err)
{
    (void)err;
    memcpy(out, self(recording)->values[channel] + first, (size_t)count * sizeof *out);
    return ERR_OK;
}

static void csv_close(struct recording *recording)
{
    struct csv *csv = (struct csv *)(void *)recording;
    csv_columns_free(&csv->columns);
    free(csv->runs);
}

static const struct recording_ops csv_ops = {csv_read, NULL, csv_close};

/* ---- even rows ---- */

/* Median step, of up to MEDIAN_OF steps spread over the file; 0 when there is none. */
static int64_t median_step(const struct csv_columns *columns)
{
    double steps[MEDIAN_OF];
    size_t gaps = columns->row_count > 0 ? columns->row_count - 1 : 0, count = 0;
    size_t every = gaps / MEDIAN_OF + 1;
    for (size_t i = 0; i < gaps && count < MEDIAN_OF; i += every)
        steps[count++] = (double)(columns->times_ns[i + 1] - columns->times_ns[i]);
    return count > 0 ? (int64_t)median(steps, count) : 0;
}

/* First row after `from` that follows a hole; row_count when there is none. */
static size_t stretch_end(const struct csv_columns *columns, size_t from, double step_ns)
{
    size_t at = from + 1;
    while (at < columns->row_count &&
           (double)(columns->times_ns[at] - columns->times_ns[at - 1]) <= 1.5 * step_ns)
        at++;
    return at;
}

/* Does a period of step_ns put rows [from, end) within a period of their times? */
static bool fits(const struct csv_columns *columns, size_t from, size_t end, double step_ns)
{
    for (size_t i = from; i < end; i++) {
        double off =
            (double)(columns->times_ns[i] - columns->times_ns[from]) - (double)(i - from) * step_ns;
        if (fabs(off) > step_ns)
            return false;
    }
    return true;
}

/* How finely the times around row `end` are written: the greatest power of ten, in ns, that divides
 * a few of them. */
static double resolution_ns(const struct csv_columns *columns, size_t from, size_t end)
{
    int64_t power = NS_PER_S;
    for (size_t i = end - from > 16 ? end - 16 : from; i < end; i++) {
        while (power > 1 && columns->times_ns[i] % power != 0)
            power /= 10;
    }
    return (double)power;
}

/* The period over the longest stretch, snapped to a whole rate or a whole period when the end of
 * that stretch then still lies where it is written, as finely as it is written. */
static double fit_step(const struct csv_columns *columns, int64_t typical_ns)
{
    size_t best_from = 0, best_end = 0;
    for (size_t from = 0; from < columns->row_count;) {
        size_t end = stretch_end(columns, from, (double)typical_ns);
        if (end - from > best_end - best_from) {
            best_from = from;
            best_end = end;
        }
        from = end;
    }
    if (best_end - best_from < 2)
        return (double)typical_ns;
    double span = (double)(columns->times_ns[best_end - 1] - columns->times_ns[best_from]);
    double steps = (double)(best_end - best_from - 1), step = span / steps;
    double rate = round(1e9 / step), period = round(step / 1e9);
    double snapped = rate >= 1 ? 1e9 / rate : period * 1e9;
    double slack = fmin(step / 2, resolution_ns(columns, best_from, best_end));
    return fabs(snapped * steps - span) <= slack ? snapped : step;
}

static int add_run(struct csv *csv, int64_t start_ns, size_t first, size_t count, double step_ns,
                   struct err *err)
{
    int failed = array_reserve((void **)&csv->runs, &csv->run_room, csv->run_count + 1,
                               sizeof *csv->runs, err);
    int64_t span = (int64_t)llround(step_ns * (double)count);
    struct run *before = csv->run_count > 0 ? &csv->runs[csv->run_count - 1] : NULL;
    /* The time before a hole may be written early: runs never overlap all the same. */
    if (!failed && before && run_end_ns(before) > start_ns)
        before->span_ns = start_ns - before->start_ns;
    if (!failed)
        csv->runs[csv->run_count++] =
            (struct run){start_ns, span > 0 ? span : 1, (int64_t)first, (int64_t)count};
    return failed;
}

/* Cuts the rows into even stretches; csv->even says whether that could be done. */
static int cut_runs(struct csv *csv, struct err *err)
{
    const struct csv_columns *columns = &csv->columns;
    int64_t typical_ns = median_step(columns);
    if (typical_ns <= 0)
        return ERR_OK;
    double step = fit_step(columns, typical_ns);
    int64_t origin = columns->times_ns[0];
    for (size_t from = 0; from < columns->row_count;) {
        size_t end = stretch_end(columns, from, step);
        if (!fits(columns, from, end, step)) {
            csv->run_count = 0;
            return ERR_OK;
        }
        int failed = add_run(csv, columns->times_ns[from] - origin, from, end - from, step, err);
        if (failed)
            return failed;
        from = end;
    }
    /* Nothing but holes is not a rate. */
    csv->even = csv->run_count * 4 <= columns->row_count;
    if (!csv->even)
        csv->run_count = 0;
    return ERR_OK;
}

static int lay_rows(struct csv *csv, double rate_hz, struct err *err)
{
    const struct csv_columns *columns = &csv->columns;
    if (columns->row_count == 0)
        return err_set(err, ERR_FORMAT, "%s: no row that can be used", csv->base.info.path);
    if (rate_hz <= 0)
        return cut_runs(csv, err);
    csv->even = true;
    return add_run(csv, 0, 0, columns->row_count, 1e9 / rate_hz, err);
}

/* ---- channels ---- */

/* Most cells empty, and the others apart from one another. */
static bool is_sparse(const struct csv_column *column, size_t rows)
{
    size_t filled = 0, pieces = 0;
    for (size_t i = 0; i < rows; i++) {
        bool there = !isnan(column->values[i]);
        filled += there;
        pieces += there && (i == 0 || isnan(column->values[i - 1]));
    }
    return filled > 0 && filled < rows / 2 && pieces > filled / 4;
}

/* Keeps only the filled cells, with their times. */
static int irregular_channel(struct csv *csv, struct csv_column *column, struct channel *channel,
                             struct err *err)
{
    const struct csv_columns *columns = &csv->columns;
    int64_t *times = arena_alloc(&csv->base.arena, columns->row_count, sizeof *times);
    if (!times)
        return err_memory(err, "a channel's times");
    size_t kept = 0, run = 0;
    for (size_t i = 0; i < columns->row_count; i++) {
        if (isnan(column->values[i]))
            continue;
        while (!columns->times_ns && csv->runs[run].first + csv->runs[run].count <= (int64_t)i)
            run++;
        times[kept] = columns->times_ns ? columns->times_ns[i] - columns->times_ns[0]
                                        : run_time_ns(&csv->runs[run], (int64_t)i);
        column->values[kept++] = column->values[i];
    }
    channel->times_ns = times;
    channel->samples = (int64_t)kept;
    return ERR_OK;
}

static int make_channel(struct csv *csv, struct csv_column *column, struct channel *channel,
                        struct err *err)
{
    *channel = (struct channel){
        .label = column->label, .unit = column->unit, .transducer = "", .prefilter = ""};
    if (!csv->even || is_sparse(column, csv->columns.row_count))
        return irregular_channel(csv, column, channel, err);
    channel->runs = csv->runs;
    channel->run_count = csv->run_count;
    channel->samples = (int64_t)csv->columns.row_count;
    channel->rate_hz = run_rate_hz(&csv->runs[0]);
    return ERR_OK;
}

static int make_channels(struct csv *csv, struct err *err)
{
    struct recording *base = &csv->base;
    size_t count = csv->columns.column_count, made = 0, text_columns = 0;
    base->channels = arena_alloc(&base->arena, count, sizeof *base->channels);
    csv->values = arena_alloc(&base->arena, count, sizeof *csv->values);
    int failed = base->channels && csv->values ? ERR_OK : err_memory(err, "the channels");
    for (size_t i = 0; i < count && !failed; i++) {
        struct csv_column *column = &csv->columns.columns[i];
        if (column->texts > 0 && column->texts >= column->numbers) {
            text_columns++;
            continue;
        }
        if (column->texts > 0)
            failed =
                recording_note(base, err,
                               "column '%s': cells that are no numbers are taken as empty: %zu "
                               "(first on line %zu)",
                               column->label, column->texts, column->first_text_line);
        if (!failed)
            failed = make_channel(csv, column, &base->channels[made], err);
        csv->values[made++] = column->values;
    }
    if (!failed && text_columns > 0)
        failed = recording_note(base, err, "columns of text, not numbers, are left out: %zu",
                                text_columns);
    if (!failed && made == 0)
        failed = err_set(err, ERR_FORMAT, "%s: no column of numbers", base->info.path);
    base->info.channels = base->channels;
    base->info.channel_count = made;
    return failed;
}

static int make_gaps(struct csv *csv, struct err *err)
{
    struct gap *gaps =
        arena_alloc(&csv->base.arena, csv->run_count ? csv->run_count : 1, sizeof *gaps);
    if (!gaps)
        return err_memory(err, "the gaps");
    for (size_t i = 1; i < csv->run_count; i++) {
        int64_t end = run_end_ns(&csv->runs[i - 1]);
        gaps[i - 1] = (struct gap){end, csv->runs[i].start_ns - end};
    }
    csv->base.info.gaps = gaps;
    csv->base.info.gap_count = csv->run_count > 0 ? csv->run_count - 1 : 0;
    return ERR_OK;
}

/* ---- what was odd, and the start ---- */

static int note_rows(struct csv *csv, struct err *err)
{
    const struct csv_columns *columns = &csv->columns;
    struct recording *base = &csv->base;
    int failed = ERR_OK;
    if (columns->backwards * 100 > columns->row_count + columns->backwards &&
        columns->backwards > 1)
        return err_set(err, ERR_FORMAT,
                       "%s:%zu: time goes backwards (%zu rows do so); sort the "
                       "rows by time",
                       base->info.path, columns->first_backwards_line, columns->backwards);
    if (columns->backwards > 0)
        failed = recording_note(base, err,
                                "rows earlier than the row before are left out: %zu (first on line "
                                "%zu)",
                                columns->backwards, columns->first_backwards_line);
    if (!failed && columns->bad_times > 0)
        failed = recording_note(base, err,
                                "rows without a usable time are left out: %zu (first on line %zu)",
                                columns->bad_times, columns->first_bad_time_line);
    if (!failed && columns->odd_width > 0)
        failed = recording_note(base, err,
                                "rows with fewer or more fields than the first line: %zu (first on "
                                "line %zu)",
                                columns->odd_width, columns->first_odd_width_line);
    return failed;
}

static int find_start(struct csv *csv, struct err *err)
{
    const struct csv_columns *columns = &csv->columns;
    char text[TIME_TEXT_SIZE];
    csv->base.info.start_civil_ns = NS_NONE;
    if (!columns->times_ns)
        return ERR_OK;
    int64_t first = columns->times_ns[0];
    if (columns->clock == CSV_CIVIL) {
        csv->base.info.start_civil_ns = first;
        return ERR_OK;
    }
    if (columns->clock == CSV_DAY) {
        ns_format_day(first, 3, text);
        return recording_note(&csv->base, err,
                              "times of day without a date: it starts at %s of an unknown day",
                              text);
    }
    if (first == 0)
        return ERR_OK;
    return recording_note(&csv->base, err,
                          "the time column starts at %.3f s; recording time 0 is its first row",
                          s_from_ns(first));
}

static int64_t end_ns(const struct csv *csv)
{
    if (csv->run_count > 0)
        return run_end_ns(&csv->runs[csv->run_count - 1]);
    const struct csv_columns *columns = &csv->columns;
    return columns->times_ns[columns->row_count - 1] - columns->times_ns[0] + 1;
}

/* ---- opening ---- */

static bool has_suffix(const char *path)
{
    static const char *const suffixes[] = {".csv", ".tsv", ".txt", ".csv.gz", ".tsv.gz", ".txt.gz"};
    for (size_t i = 0; i < sizeof suffixes / sizeof *suffixes; i++) {
        if (path_has_suffix(path, suffixes[i]))
            return true;
    }
    return false;
}

/* By name, and by looking like text: a file of random bytes is no table whatever it is called. */
static bool recognise(const char *path, const uint8_t *head, size_t size)
{
    bool gzip = size >= 2 && head[0] == 0x1F && head[1] == 0x8B;
    if (!has_suffix(path))
        return false;
    return gzip || memchr(head, 0, size) == NULL;
}

static int fill(struct csv *csv, const struct reader_options *options, struct err *err)
{
    int failed = note_rows(csv, err);
    if (!failed)
        failed = lay_rows(csv, options->rate_hz, err);
    if (!failed)
        failed = make_channels(csv, err);
    if (!failed)
        failed = make_gaps(csv, err);
    if (!failed)
        failed = find_start(csv, err);
    if (failed)
        return failed;
    struct recording_info *info = &csv->base.info;
    info->format = "CSV";
    info->subject = info->equipment = "";
    info->span_ns = end_ns(csv);
    return ERR_OK;
}

static int csv_open(const char *path, const struct reader_options *options,
                    const struct file_space *files, struct recording **out, struct err *err)
{
    struct mapped mapped = {0};
    struct csv *csv = calloc(1, sizeof *csv);
    if (!csv)
        return err_memory(err, path);
    csv->base.ops = &csv_ops;
    csv->base.info.path = arena_string(&csv->base.arena, path);
    int failed =
        csv->base.info.path ? files->map(files, path, &mapped, err) : err_memory(err, path);
    if (!failed) {
        failed = csv_columns_read(mapped.data, mapped.size, path, options->rate_hz,
                                  &csv->base.arena, &csv->columns, err);
        files->unmap(files, &mapped);
    }
    if (!failed)
        failed = fill(csv, options, err);
    if (failed)
        recording_close(&csv->base);
    else
        *out = &csv->base;
    return failed;
}

const struct reader csv_reader = {
    "csv", ".csv .tsv .txt, also .gz  (a header line, a time column or --rate)", recognise,
    csv_open};
