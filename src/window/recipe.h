/*
 * recipe.h - which windows to export: an INI file, versioned with the study, read once into a
 * frozen struct. Every error names file, line and key, and what is allowed.
 *
 *   [events]
 *   codes = incision, intubation        required; * = all of the codebook
 *   states = marked, confirmed          default: incomplete, marked, confirmed
 *   first = yes                         only the first mark of each code
 *   least-distance = 60                 s to the mark kept before; nearer ones are left out
 *   not-within = -120..60 of cautery    left out when it lies from 120 s before such a mark's
 *                                       onset to 60 s after its end; may be repeated
 *   [window]
 *   before = 30, after = 60, rate = 4   s, s, samples a second; required
 *   baseline = -30..-5 median percent   range in s from the mark; mean (default) or median; none
 *                                       (default), difference, percent or z: what is written
 *   valid = 0.8                         least share of valid samples; default 0.5
 *   age = 60                            s that a step trace's value holds; default 60
 *   [signals]
 *   NAME = DERIVATION "CHANNEL" parameter=value ...
 */
#ifndef WINDOW_RECIPE_H
#define WINDOW_RECIPE_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "base/err.h"
#include "codebook/codebook.h"
#include "physiology/derivation.h"
#include "store/store.h"

enum baseline_statistic { BASELINE_MEAN, BASELINE_MEDIAN };
enum baseline_mode { BASELINE_NONE, BASELINE_DIFFERENCE, BASELINE_PERCENT, BASELINE_Z };

struct recipe_signal {
    const char *name;
    const struct derivation *derivation;
    const char *channel;         /* NULL: by role */
    const char *const *settings; /* "k=v", shape (setting_count) */
    size_t setting_count;
    int line;
};

struct recipe_exclusion {
    int64_t from_ns, to_ns; /* from_ns <= to_ns */
    const char *code;
};

struct recipe {
    const char *name; /* as given to recipe_parse */
    const char *text; /* the file, for provenance */
    size_t size;
    const char *const *codes; /* shape (code_count); 0 = all */
    size_t code_count;
    bool states[4]; /* by enum mark_state */
    bool first;
    int64_t least_distance_ns; /* 0 = none */
    const struct recipe_exclusion *exclusions;
    size_t exclusion_count;
    int64_t before_ns, after_ns;
    double rate_hz;
    int64_t samples; /* of a window: round((before + after) * rate) */
    bool has_baseline;
    int64_t baseline_from_ns, baseline_to_ns;
    enum baseline_statistic baseline_statistic;
    enum baseline_mode baseline_mode;
    double valid_share;
    int64_t age_ns;
    const struct recipe_signal *signals;
    size_t signal_count;
};

MUST_CHECK int recipe_parse(const char *text, size_t size, const char *name,
                            const struct codebook *codebook, struct recipe **out, struct err *err);
void recipe_free(struct recipe *recipe);

const char *baseline_mode_name(enum baseline_mode mode);
const char *baseline_statistic_name(enum baseline_statistic statistic);

/* Seconds from the mark of sample k of a window. */
double recipe_time_s(const struct recipe *recipe, int64_t k);

#endif
