/*
 * features_csv.c - one row for each signal of each window: the numbers that sum it up.
 */
#include "export/writer.h"

static const struct column_entry columns[] = {
    {"case", "", "name of the case", ""},
    {"mark", "", "number of the mark in the case", ""},
    {"code", "", "code of the mark in the study's codebook", ""},
    {"onset_s", "s", "time of the mark from the case's start", ""},
    {"signal", "", "name of the signal in the recipe", ""},
    {"unit", "", "UCUM unit of mean, peak and trough", ""},
    {"valid_share", "1", "valid samples over all samples of the window", ""},
    {"baseline", "",
     "mean or median of the baseline range before correction, in the signal's own "
     "unit",
     ""},
    {"mean", "", "mean of the valid samples from the mark on", ""},
    {"peak", "", "greatest valid sample from the mark on", ""},
    {"peak_latency_s", "s", "time of the peak from the mark; the first of several", ""},
    {"trough", "", "least valid sample from the mark on", ""},
    {"trough_latency_s", "s", "time of the trough from the mark; the first of several", ""},
    {"area", "",
     "integral from the mark on by trapezia between neighbouring valid samples, in "
     "unit times s",
     ""},
    {0},
};

static int begin(const struct export_job *job, struct outfile *out, struct err *err)
{
    (void)job;
    struct str text = {0};
    for (size_t i = 0; columns[i].name; i++)
        str_putf(&text, "%s%s", i ? "," : "", columns[i].name);
    str_putc(&text, '\n');
    int failed = write_text(out, &text, err);
    str_free(&text);
    return failed;
}

/* Samples are float: more digits would say nothing. */
static void put_value(struct str *text, double value)
{
    str_putc(text, ',');
    str_put_float(text, (float)value);
}

static int window(const struct export_job *job, const struct export_window *window,
                  struct outfile *out, struct err *err)
{
    struct str text = {0};
    for (size_t i = 0; i < job->recipe->signal_count; i++) {
        const struct features *f = &window->features[i];
        put_row_start(job, window->mark, &text);
        str_putf(&text, ",%s,", job->signals[i].recipe->name);
        str_put_csv(&text, job->signals[i].written);
        str_putc(&text, ',');
        str_put_double(&text, f->valid_share);
        put_value(&text, f->baseline);
        put_value(&text, f->mean);
        put_value(&text, f->peak);
        put_value(&text, f->peak_s);
        put_value(&text, f->trough);
        put_value(&text, f->trough_s);
        put_value(&text, f->area);
        str_putc(&text, '\n');
    }
    int failed = write_text(out, &text, err);
    str_free(&text);
    return failed;
}

const struct writer features_writer = {
    .name = "features",
    .file = "features.csv",
    .what = "one row for each signal of each window: baseline, mean, peak, trough, area",
    .columns = columns,
    .begin = begin,
    .window = window,
};
