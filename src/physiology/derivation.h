/*
 * derivation.h - the derivations table: published methods that make traces or event trains out of
 * traces. physiology/ knows no files, no store and no screen.
 *
 * To add a method: one new file with a `const struct derivation`, and one line in the table in
 * derivation.c. The entry is also the documentation: help, the data dictionary and the recipe
 * checker print it.
 */
#ifndef PHYSIOLOGY_DERIVATION_H
#define PHYSIOLOGY_DERIVATION_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "base/err.h"
#include "base/progress.h"
#include "trace/trace.h"
#include "trace/train.h"

enum derivation_kind { DERIVES_TRACE, DERIVES_TRAIN };

struct parameter {
    const char *name;       /* "rate"; NULL ends the list */
    const char *unit;       /* UCUM; "" = none */
    double standard;        /* default */
    double least, greatest; /* inclusive */
    const char *choices;    /* "raw|db|relative": the value is the index; NULL = a number */
    const char *help;
};

struct derive_input {
    const struct trace *const *channels; /* shape (channel_count): those of the entry's role */
    size_t channel_count;
    const struct train *train; /* of the entry's `needs_train`; NULL when it needs none */
    const double *parameters;  /* in the order of the entry's list, defaults filled in */
    int64_t from_ns, to_ns;    /* what is wanted (case time); more may be computed */
    int threads;               /* at least 1 */
    struct progress *progress; /* or NULL */
};

/* Exactly one is set, as `kind` says; the caller owns it. A derivation that hands its input
 * through (channel) makes a trace that reads the input, which must outlive it. */
struct derived {
    struct trace *trace;
    struct train train;
};

struct derivation {
    const char *name; /* "heart-rate": the trade's word */
    enum derivation_kind kind;
    enum role role;          /* of the channels it needs; ROLE_NONE = any, one, named */
    bool one_channel;        /* takes exactly one channel; otherwise every one of its role */
    const char *needs_train; /* name of the derivation whose train it starts from, or NULL */
    const char *unit;        /* UCUM; NULL = that of its input */
    const struct parameter *parameters;
    const char *summary; /* one line */
    const char *source;  /* the paper */
    const char *edges;   /* behaviour at gaps, artefact and the ends: one or two sentences */
    const char *version; /* of the method's code: part of a cache key and of provenance */
    int (*compute)(const struct derive_input *input, struct derived *out, struct err *err);
};

extern const struct derivation *const derivations[]; /* NULL-terminated */

const struct derivation *derivation_find(const char *name); /* NULL when there is none */
size_t derivation_parameter_count(const struct derivation *derivation);

/* Fills values, shape (derivation_parameter_count), with defaults, then applies "k=v" texts.
 * An unknown name, a bad number or one out of range is ERR_USAGE, naming what is allowed. */
MUST_CHECK int derivation_parameters(const struct derivation *derivation,
                                     const char *const *settings, size_t setting_count,
                                     double *values, struct err *err);

void derived_free(struct derived *derived);

#endif
