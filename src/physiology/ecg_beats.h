/*
 * ecg_beats.h - the beat detector behind the derivation `beats`, with its inner knob.
 */
#ifndef PHYSIOLOGY_ECG_BEATS_H
#define PHYSIOLOGY_ECG_BEATS_H

#include <stddef.h>
#include <stdint.h>

#include "base/err.h"
#include "base/progress.h"
#include "trace/trace.h"
#include "trace/train.h"

/* R peaks of all `leads`, shape (lead_count), into `out` (empty before). `block` samples are read
 * at a time (ECG_BLOCK is a good choice); the result does not depend on it. */
MUST_CHECK int ecg_beats(const struct trace *const *leads, size_t lead_count, int64_t block,
                         struct progress *progress, struct train *out, struct err *err);

#endif
