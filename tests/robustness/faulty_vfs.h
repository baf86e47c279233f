/*
 * faulty_vfs.h - a disk that fails the Nth read, write, sync, truncation, open or lock, once or
 * from then on.
 */
#ifndef TESTS_ROBUSTNESS_FAULTY_VFS_H
#define TESTS_ROBUSTNESS_FAULTY_VFS_H

#include <stdbool.h>

/* Makes it SQLite's default. */
void faulty_install(void);

extern int faulty_at;    /* which call fails, from 1; 0 = none */
extern int faulty_calls; /* so far; may be set back */
extern bool faulty_lasting;

#endif
