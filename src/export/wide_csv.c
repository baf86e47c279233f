/*
 * wide_csv.c - one row for each instant of each window, one column for each signal.
 */
#include "export/writer.h"

static const struct column_entry columns[] = {
    {"case", "", "name of the case", ""},
    {"mark", "", "number of the mark in the case", ""},
    {"code", "", "code of the mark in the study's codebook", ""},
    {"onset_s", "s", "time of the mark from the case's start", ""},
    {"t_s", "s", "time of the samples from the mark", ""},
    {0},
};

static int begin(const struct export_job *job, struct outfile *out, struct err *err)
{
    struct str text = {0};
    str_put(&text, "case,mark,code,onset_s,t_s");
    for (size_t i = 0; i < job->recipe->signal_count; i++)
        str_putf(&text, ",%s", job->signals[i].recipe->name);
    str_putc(&text, '\n');
    int failed = write_text(out, &text, err);
    str_free(&text);
    return failed;
}

static int window(const struct export_job *job, const struct export_window *window,
                  struct outfile *out, struct err *err)
{
    struct str start = {0}, text = {0};
    int failed = ERR_OK;
    int64_t samples = job->recipe->samples;
    put_row_start(job, window->mark, &start);
    str_putc(&start, ',');
    for (int64_t k = 0; k < samples && !failed; k++) {
        str_put_n(&text, str_text(&start), start.length);
        str_put(&text, job->times[k]);
        for (size_t i = 0; i < job->recipe->signal_count; i++) {
            str_putc(&text, ',');
            str_put_float(&text, window->values[(int64_t)i * samples + k]);
        }
        str_putc(&text, '\n');
        failed =
            str_failed(&start) ? err_memory(err, "writing a table") : write_text(out, &text, err);
    }
    str_free(&start);
    str_free(&text);
    return failed;
}

const struct writer wide_writer = {
    .name = "wide",
    .file = "windows-wide.csv",
    .what = "one row for each instant of each window, one column for each signal",
    .columns = columns,
    .signal_columns = true,
    .begin = begin,
    .window = window,
};
