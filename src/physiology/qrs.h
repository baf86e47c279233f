/*
 * qrs.h - deciding which peaks of a detection function are QRS complexes.
 *
 * Peaks come in time order, at least QRS_REFRACTORY ticks apart, in a unit in which a usual QRS is
 * about 1. A decision may come late: a weak peak is taken after all when the next beat fails to
 * come. Fixed size, no memory of its own, one thread.
 */
#ifndef PHYSIOLOGY_QRS_H
#define PHYSIOLOGY_QRS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum {
    QRS_REFRACTORY = 40, /* ticks: 200 ms */
    QRS_MEMORY = 8,      /* beats, noise peaks and intervals that thresholds are medians of */
    QRS_WAITING = 64,    /* weak peaks kept for a second look */
};

struct qrs_peak {
    int64_t tick;
    double height;  /* of the detection function */
    double slope;   /* steepest in it: tells a QRS from a T wave */
    double clarity; /* how many times higher QRS stand here than what lies between them */
    size_t lead;    /* caller's: where to look for the R peak */
    bool doubtful;  /* amid noise; the detector adds: taken at a second look */
};

struct qrs_detector {
    double beats[QRS_MEMORY], noises[QRS_MEMORY], intervals[QRS_MEMORY];
    size_t beat_count, noise_count, interval_count; /* ever added */
    bool has_last, has_sure;                        /* in this stretch */
    struct qrs_peak last;                 /* the last QRS: may yet turn out to be one too many */
    struct qrs_peak sure;                 /* the one before it, which stands */
    struct qrs_peak waiting[QRS_WAITING]; /* since last */
    size_t waiting_count;
    struct qrs_peak found[QRS_WAITING + 2]; /* by the last call */
    size_t found_count;
};

void qrs_init(struct qrs_detector *detector);

/* Fills found[0 .. found_count) with what is now known to be a QRS, in time order. */
void qrs_push(struct qrs_detector *detector, const struct qrs_peak *peak);

/* The stretch ends before `tick`: the last weak peaks are looked at again, into found[]; what is
 * known of heights and intervals stays. */
void qrs_end_stretch(struct qrs_detector *detector, int64_t tick);

#endif
