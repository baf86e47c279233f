/*
 * test_dsp_stats.c - order statistics against plain sorting, and published values.
 */
#include <criterion/criterion.h>

#include <math.h>
#include <stdint.h>
#include <stdlib.h>

#include "dsp/stats.h"

static int by_value(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

Test(dsp_stats, selection_agrees_with_sorting)
{
    uint32_t seed = 1;
    for (size_t count = 1; count < 60; count++) {
        for (int shape = 0; shape < 4; shape++) {
            double values[60], sorted[60], scratch[60];
            for (size_t i = 0; i < count; i++) {
                seed = seed * 1664525u + 1013904223u;
                double random = (double)(seed >> 8);
                values[i] = shape == 0   ? random
                            : shape == 1 ? fmod(random, 3)
                            : shape == 2 ? (double)i
                                         : -(double)i;
                sorted[i] = values[i];
            }
            qsort(sorted, count, sizeof *sorted, by_value);
            for (size_t k = 0; k < count; k++) {
                for (size_t i = 0; i < count; i++)
                    scratch[i] = values[i];
                cr_assert_eq(select_kth(scratch, count, k), sorted[k]);
            }
            for (size_t i = 0; i < count; i++)
                scratch[i] = values[i];
            double middle = (sorted[(count - 1) / 2] + sorted[count / 2]) / 2;
            cr_assert_eq(median(scratch, count), middle);
        }
    }
}

/* numpy.quantile([3, 1, 4, 1, 5, 9, 2, 6], [0, .1, .25, .5, .9, 1]), numpy 1.24 */
Test(dsp_stats, quantiles_are_those_of_numpy)
{
    static const double shares[] = {0, 0.1, 0.25, 0.5, 0.9, 1};
    static const double expected[] = {1, 1, 1.75, 3.5, 6.9, 9};
    for (size_t i = 0; i < 6; i++) {
        double values[] = {3, 1, 4, 1, 5, 9, 2, 6};
        cr_expect_float_eq(quantile(values, 8, shares[i]), expected[i], 1e-12);
    }
    cr_expect(isnan(quantile(NULL, 0, 0.5)));
    cr_expect(isnan(median(NULL, 0)));
}
