/*
 * dictionary.c - every column of every table that is written: unit, method, source.
 */
#include <string.h>

#include "export/writer.h"

static const struct column_entry own_columns[] = {
    {"file", "", "name of the table", ""},
    {"column", "", "name of the column, or of the signal in the rows of a long table", ""},
    {"unit", "", "UCUM unit; empty for text and numbers without one", ""},
    {"method", "", "what the column holds", ""},
    {"source", "", "the published method behind it", ""},
    {0},
};

static void put_row(struct str *text, const char *file, const struct column_entry *entry)
{
    const char *fields[] = {file, entry->name, entry->unit, entry->method, entry->source};
    for (size_t i = 0; i < sizeof fields / sizeof *fields; i++) {
        if (i > 0)
            str_putc(text, ',');
        str_put_csv(text, fields[i]);
    }
    str_putc(text, '\n');
}

/* "heart-rate (what it is) of beats, rate=4: edges. Baseline ..." */
static void put_method(const struct export_job *job, const struct export_signal *signal,
                       struct str *out)
{
    const struct derivation *derivation = signal->recipe->derivation;
    str_putf(out, "%s: %s", derivation->name, derivation->summary);
    if (signal->recipe->channel)
        str_putf(out, "; channel %s", signal->recipe->channel);
    for (size_t i = 0; i < derivation_parameter_count(derivation); i++) {
        str_putf(out, "; %s=", derivation->parameters[i].name);
        str_put_double(out, signal->parameters[i]);
    }
    str_putf(out, "; edges: %s", derivation->edges);
    if (signal->trace->times_ns)
        str_putf(out, "; each value holds until the next, %g s at most",
                 s_from_ns(job->recipe->age_ns));
    else if (signal->trace->rate_hz <= 10 && signal->trace->rate_hz <= job->recipe->rate_hz)
        str_put(out, "; straight lines between its own samples");
    else
        str_put(out, "; resampled by windowed sinc, anti-aliased");
    if (job->recipe->baseline_mode != BASELINE_NONE)
        str_putf(out, "; baseline correction: %s from the %s of %g..%g s",
                 baseline_mode_name(job->recipe->baseline_mode),
                 baseline_statistic_name(job->recipe->baseline_statistic),
                 s_from_ns(job->recipe->baseline_from_ns), s_from_ns(job->recipe->baseline_to_ns));
}

static int put_signals(const struct export_job *job, const char *file, struct str *text,
                       struct err *err)
{
    for (size_t i = 0; i < job->recipe->signal_count; i++) {
        struct str method = {0};
        put_method(job, &job->signals[i], &method);
        struct column_entry entry = {job->signals[i].recipe->name, job->signals[i].written,
                                     str_text(&method), job->signals[i].recipe->derivation->source};
        put_row(text, file, &entry);
        bool bad = str_failed(&method);
        str_free(&method);
        if (bad)
            return err_memory(err, "the dictionary");
    }
    return ERR_OK;
}

static int end(const struct export_job *job, struct outfile *out, struct err *err)
{
    struct str text = {0};
    int failed = ERR_OK;
    str_put(&text, "file,column,unit,method,source\n");
    for (size_t i = 0; writers[i] && !failed; i++) {
        for (size_t k = 0; writers[i]->columns && writers[i]->columns[k].name; k++)
            put_row(&text, writers[i]->file, &writers[i]->columns[k]);
        /* The long table holds signals in rows: they are described under its name as well. */
        if (writers[i]->signal_columns || strcmp(writers[i]->name, "long") == 0)
            failed = put_signals(job, writers[i]->file, &text, err);
    }
    if (!failed)
        failed = write_text(out, &text, err);
    str_free(&text);
    return failed;
}

const struct writer dictionary_writer = {
    .name = "dictionary",
    .file = "dictionary.csv",
    .what = "every column of every table: unit, method, source",
    .columns = own_columns,
    .end = end,
};
