/*
 * long_csv.c - one row for each sample of each signal of each window.
 */
#include <math.h>

#include "export/writer.h"

enum { FLUSH_AT = 1 << 16 };

static const struct column_entry columns[] = {
    {"case", "", "name of the case", ""},
    {"mark", "", "number of the mark in the case", ""},
    {"code", "", "code of the mark in the study's codebook", ""},
    {"onset_s", "s", "time of the mark from the case's start", ""},
    {"t_s", "s", "time of the sample from the mark", ""},
    {"signal", "", "name of the signal in the recipe", ""},
    {"unit", "", "UCUM unit of the value as written", ""},
    {"value", "",
     "value of the signal, after baseline correction where the recipe asks for one; "
     "empty where not valid",
     ""},
    {"valid", "", "1 = the value is valid, 0 = it is not, and empty", ""},
    {0},
};

static int begin(const struct export_job *job, struct outfile *out, struct err *err)
{
    (void)job;
    struct str text = {0};
    str_put(&text, "case,mark,code,onset_s,t_s,signal,unit,value,valid\n");
    int failed = write_text(out, &text, err);
    str_free(&text);
    return failed;
}

/* All rows of one signal. What stays the same from row to row is made once: `start` before t_s,
 * `middle` after it. */
static int put_signal(const struct export_job *job, const float *values, const struct str *start,
                      const struct str *middle, struct str *text, struct outfile *out,
                      struct err *err)
{
    for (int64_t k = 0; k < job->recipe->samples; k++) {
        str_put_n(text, str_text(start), start->length);
        str_put(text, job->times[k]);
        str_put_n(text, str_text(middle), middle->length);
        str_put_float(text, values[k]);
        str_put(text, isnan(values[k]) ? ",0\n" : ",1\n");
        int failed = text->length > FLUSH_AT ? write_text(out, text, err) : ERR_OK;
        if (failed)
            return failed;
    }
    return write_text(out, text, err);
}

static int window(const struct export_job *job, const struct export_window *window,
                  struct outfile *out, struct err *err)
{
    struct str start = {0}, middle = {0}, text = {0};
    int failed = ERR_OK;
    put_row_start(job, window->mark, &start);
    str_putc(&start, ',');
    for (size_t i = 0; i < job->recipe->signal_count && !failed; i++) {
        str_clear(&middle);
        str_putf(&middle, ",%s,", job->signals[i].recipe->name);
        str_put_csv(&middle, job->signals[i].written);
        str_putc(&middle, ',');
        failed = str_failed(&start) || str_failed(&middle)
                     ? err_memory(err, "writing a table")
                     : put_signal(job, window->values + (int64_t)i * job->recipe->samples, &start,
                                  &middle, &text, out, err);
    }
    str_free(&start);
    str_free(&middle);
    str_free(&text);
    return failed;
}

const struct writer long_writer = {
    .name = "long",
    .file = "windows-long.csv",
    .what = "one row for each sample of each signal of each window",
    .columns = columns,
    .begin = begin,
    .window = window,
};
