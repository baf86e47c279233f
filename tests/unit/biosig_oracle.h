/*
 * biosig_oracle.h - one channel of a file as the biosig library reads it. In a file of its own,
 * since its header and Criterion's disagree.
 */
#ifndef UNIT_BIOSIG_ORACLE_H
#define UNIT_BIOSIG_ORACLE_H

#include <stddef.h>

/* Physical values of `count` samples over `records` records into out; 0, or -1. */
int biosig_channel(const char *path, int channel, size_t records, size_t count, double *out);

#endif
