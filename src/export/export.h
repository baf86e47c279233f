/*
 * export.h - from a recipe and a case to a folder of tables.
 *
 * Windows are cut one mark at a time and handed to all writers; memory does not grow with their
 * number. The folder appears whole or not at all, and the same input gives the same bytes.
 */
#ifndef EXPORT_EXPORT_H
#define EXPORT_EXPORT_H

#include "base/err.h"
#include "base/progress.h"
#include "case/casefile.h"
#include "window/recipe.h"

struct export_summary {
    size_t windows;  /* marks taken */
    size_t excluded; /* marks of the codes asked for that were left out */
    size_t left_out; /* signals of windows with too few valid samples */
};

MUST_CHECK int export_run(struct casefile *casefile, const struct recipe *recipe,
                          const char *folder, struct progress *progress, struct export_summary *out,
                          struct err *err);

#endif
