/*
 * edf_repair.h - completing an EDF+ or BDF+ file that a crash left open.
 */
#ifndef RECORDING_EDF_REPAIR_H
#define RECORDING_EDF_REPAIR_H

#include "base/err.h"

/* A file whose header says -1 records loses what cannot be a whole record at its end (a part of
 * one; whole ones that hold no time-keeping onset, as a power cut can leave) and gets its count;
 * a +D file whose records leave no gap becomes +C; then it is synced. A file that states a count is
 * left alone. ERR_FORMAT when it is no such file or ends inside its header. */
MUST_CHECK int edf_repair(const char *path, struct err *err);

#endif
