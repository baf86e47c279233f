/*
 * recording.h - one opened signal file: what it holds, and its samples by number.
 *
 * A recording is read-only and frozen when it opens: the header is checked once, everything in
 * struct recording_info is allocated from it, and nothing changes until recording_close().
 * Signals stay in the (memory-mapped) file and are decoded when asked for, in constant time
 * wherever in the file they are.
 *
 * Times are recording time: ns since the recording's first instant (its header start), on the
 * recording's own clock. Samples are physical values, float; a missing one is NaN.
 *
 * Threads: after opening, recording_read() and recording_minmax() may be called from any number
 * of threads at once.
 */
#ifndef RECORDING_RECORDING_H
#define RECORDING_RECORDING_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "base/err.h"
#include "base/file.h"
#include "recording/role.h"
#include "recording/run.h"

struct recording;

struct channel {
    const char *label;      /* as in the file, blanks trimmed, UTF-8; unique (" #2" is appended) */
    const char *unit;       /* as in the file; "" when there is none */
    const char *transducer; /* "" when the format has none */
    const char *prefilter;  /* "" when the format has none */
    enum role role;
    const char *role_why;              /* one clause: why this role */
    double rate_hz;                    /* of its first run; 0 for an irregular channel */
    double physical_min, physical_max; /* declared range; both 0 when the format has none */
    int64_t samples;                   /* over all runs, missing ones included */
    const struct run *runs;            /* shape (run_count); NULL for an irregular channel */
    size_t run_count;
    const int64_t *times_ns; /* irregular channel: time of each sample, shape (samples), never
                                falling; NULL for an even one. Each value holds until the next. */
};

struct gap {
    int64_t start_ns, span_ns;
};

struct annotation {
    int64_t onset_ns;
    int64_t span_ns;  /* 0 for a point */
    const char *text; /* UTF-8, never NULL */
    const char *kind; /* WFDB mnemonic ("N", "V", "+"); "" in other formats */
};

struct recording_info {
    const char *path;       /* as opened */
    const char *format;     /* "EDF", "EDF+C", "EDF+D", "BDF", ..., "WFDB", "CSV" */
    const char *subject;    /* the file's own identification texts; "" when none. Personal: never */
    const char *equipment;  /* exported unless asked */
    int64_t start_civil_ns; /* NS_NONE when the file does not say */
    int64_t span_ns;        /* from 0 to the end of the last run */
    const struct channel *channels;
    size_t channel_count;
    const struct gap *gaps; /* in all channels at once, in time order */
    size_t gap_count;
    const struct annotation *annotations; /* in onset order */
    size_t annotation_count;
    const char *const *parts; /* paths of further files its samples live in; WFDB alone has any */
    size_t part_count;
    const char *const *notes; /* oddities met and how they were taken, one line each */
    size_t note_count;
};

/* What a reader may need to be told. A zeroed struct is the usual case. */
struct reader_options {
    double rate_hz;           /* CSV without a time column; 0 = has one */
    const char *const *units; /* "LABEL=UNIT" texts, shape (unit_count) */
    size_t unit_count;
    const char *const *roles; /* "LABEL=ROLE" texts, shape (role_count) */
    size_t role_count;
    int64_t start_civil_ns;         /* when a file that does not say it starts; 0 = not known */
    const struct file_space *files; /* NULL = disk_files */
};

/* Opens any known format; `options` NULL = the usual case. On failure *out is untouched. */
MUST_CHECK int recording_open(const char *path, const struct reader_options *options,
                              struct recording **out, struct err *err);
void recording_close(struct recording *recording);

const struct recording_info *recording_info(const struct recording *recording);

/* Index of a channel by label (exact first, then any letter case); -1 when there is none. */
int recording_find(const struct recording *recording, const char *label);

/* Physical values of samples [first, first + count) of a channel into out, shape (count).
 * The range must lie inside [0, samples). */
MUST_CHECK int recording_read(const struct recording *recording, size_t channel, int64_t first,
                              int64_t count, float *out, struct err *err);

/* Least and greatest physical value of those samples, NaN ones left out; both NaN when all are. */
MUST_CHECK int recording_minmax(const struct recording *recording, size_t channel, int64_t first,
                                int64_t count, float *low, float *high, struct err *err);

#endif
