/*
 * writer.h - the writers table: how a set of windows becomes a file.
 *
 * To add a form: one new file that defines a `const struct writer`, and one line in writer.c.
 * A writer is handed the job once, then every window in turn, then the end; it holds no window
 * itself, so that memory does not grow with their number.
 */
#ifndef EXPORT_WRITER_H
#define EXPORT_WRITER_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "base/err.h"
#include "base/file.h"
#include "base/str.h"
#include "case/casefile.h"
#include "window/features.h"
#include "window/recipe.h"
#include "window/select.h"

struct export_signal {
    const struct recipe_signal *recipe;
    const struct trace *trace;
    const char *unit;         /* of the trace */
    const char *written;      /* after the baseline's correction: the same, or "%", or "1" */
    const double *parameters; /* shape (derivation_parameter_count) */
};

/* A signal of a window that had too few valid samples. */
struct left_out {
    int64_t mark;
    const char *signal;
    double valid_share;
};

struct export_job {
    struct casefile *casefile;
    const struct recipe *recipe;
    const struct export_signal *signals; /* shape (recipe->signal_count) */
    const struct selection *selection;
    const char *const *times;        /* t_s of each sample as text, shape (recipe->samples) */
    const struct left_out *left_out; /* complete only when writers' end() is called */
    size_t left_out_count;
};

struct export_window {
    const struct mark *mark;
    const float *values;             /* shape (signal_count, samples); NaN = not valid */
    const struct features *features; /* shape (signal_count) */
};

struct column_entry {
    const char *name, *unit, *method, *source;
};

struct writer {
    const char *name;                   /* "long" */
    const char *file;                   /* "windows-long.csv" */
    const char *what;                   /* one line */
    const struct column_entry *columns; /* for the dictionary; NULL-terminated; NULL = none */
    bool signal_columns;                /* one more column for each signal */
    /* Each may be NULL. Text goes through `out`, which remembers its own failure. */
    int (*begin)(const struct export_job *job, struct outfile *out, struct err *err);
    int (*window)(const struct export_job *job, const struct export_window *window,
                  struct outfile *out, struct err *err);
    int (*end)(const struct export_job *job, struct outfile *out, struct err *err);
};

extern const struct writer *const writers[]; /* NULL-terminated */

/* Is this file a provenance.json of this program, of whatever version? */
bool provenance_is_ours(const char *path);

/* Writes what `text` holds and empties it; tells when it ran out of memory. */
MUST_CHECK int write_text(struct outfile *out, struct str *text, struct err *err);

/* "case,mark,code,onset_s": how every table's rows begin. */
void put_row_start(const struct export_job *job, const struct mark *mark, struct str *out);

#endif
