/*
 * folder.h - a folder that appears whole or not at all, and replaces an earlier one whole.
 *
 * Files are written into a new folder beside the target; folder_commit() syncs it and exchanges
 * the two in one step. A target that exists is only replaced when it is an empty folder, or an
 * earlier export and nothing else: the program's own provenance.json, and no file that no writer
 * writes. A script that an analyst keeps among the tables is refused, not removed.
 */
#ifndef EXPORT_FOLDER_H
#define EXPORT_FOLDER_H

#include "base/err.h"

struct folder {
    char *path, *temporary;
};

MUST_CHECK int folder_open(struct folder *folder, const char *path, struct err *err);
/* "TEMPORARY/NAME"; caller frees; NULL when out of memory. */
MUST_CHECK char *folder_file(const struct folder *folder, const char *name);
MUST_CHECK int folder_commit(struct folder *folder, struct err *err);
/* Removes the temporary; nothing after a commit, or on a zeroed struct. */
void folder_discard(struct folder *folder);

#endif
