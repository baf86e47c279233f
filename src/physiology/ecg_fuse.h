/*
 * ecg_fuse.h - several ECG leads as one detection function, each weighted by how clearly QRS
 * complexes stand out in it just then.
 *
 * Goes through the leads a bin (2 s) at a time, and hands out the peaks of the fused function that
 * nothing within 200 ms tops. Heights are in units of a usual QRS of the time around.
 */
#ifndef PHYSIOLOGY_ECG_FUSE_H
#define PHYSIOLOGY_ECG_FUSE_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "physiology/ecg_lead.h"
#include "physiology/qrs.h"

enum { FUSE_SPAN = 2 * ECG_BIN, FUSE_EVENTS = 2 * ECG_BIN / QRS_REFRACTORY + ECG_BIN };

enum fuse_kind { FUSE_PEAK, FUSE_STRETCH_END };

struct fuse_event {
    enum fuse_kind kind;
    struct qrs_peak peak; /* of a stretch's end only the tick counts: the first that is missing */
};

struct ecg_fuse {
    struct ecg_lead *leads; /* shape (lead_count) */
    size_t lead_count;
    double *weights, *scales; /* shape (lead_count): of the bin in place */
    /* How many times higher QRS stand than what lies between them, in the clearest lead: around
     * the bin in place, and in it alone. */
    double clarity, clarity_here;
    size_t best_lead;       /* the R peak is looked for here */
    int64_t bin;            /* number of the bin in place; -1 before the first */
    float *feature, *slope; /* shape (FUSE_SPAN): the bin before and the bin in place */
    bool inside;            /* in a stretch that can be searched */
    struct fuse_event events[FUSE_EVENTS]; /* by the last call, in time order */
    size_t event_count;
};

/* The leads (initialised) stay the caller's. */
MUST_CHECK int ecg_fuse_init(struct ecg_fuse *fuse, struct ecg_lead *leads, size_t lead_count,
                             struct err *err);
void ecg_fuse_fini(struct ecg_fuse *fuse);

/* Moves on by one bin and fills events[] with what lies up to 200 ms before its end. */
MUST_CHECK int ecg_fuse_advance(struct ecg_fuse *fuse, struct err *err);

/* Skips the bins in which no lead has anything, at most `most`; returns how many. For use after
 * ecg_fuse_advance(): recordings may be hours or years apart. */
int64_t ecg_fuse_skip(struct ecg_fuse *fuse, int64_t most);

#endif
