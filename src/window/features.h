/*
 * features.h - baseline correction of a window, and the few numbers that sum it up.
 *
 * All are computed on the samples as they are exported. "After" means from the mark on (t >= 0).
 */
#ifndef WINDOW_FEATURES_H
#define WINDOW_FEATURES_H

#include "base/err.h"
#include "window/recipe.h"

struct features {
    double valid_share;      /* of all samples of the window */
    double baseline;         /* mean or median of the baseline range, before correction */
    double mean;             /* after */
    double peak, peak_s;     /* greatest after, and when (s from the mark; the first if several) */
    double trough, trough_s; /* least after */
    double area;             /* after, by trapezia between neighbouring valid samples; unit * s */
};

/* Applies the recipe's baseline to values, shape (recipe->samples), in place, and fills *out. NaN
 * where there is nothing to compute from. A percent of 0, or a z of a baseline that does not vary
 * or has one valid sample, makes every value NaN. `scratch`, shape (recipe->samples), is the
 * caller's. */
void window_features(const struct recipe *recipe, float *values, double *scratch,
                     struct features *out);

#endif
