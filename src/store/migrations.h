/*
 * migrations.h - the numbered SQL of schema/, embedded at build. migrations[i] takes a file from
 * user_version i to i + 1.
 */
#ifndef STORE_MIGRATIONS_H
#define STORE_MIGRATIONS_H

extern const char *const migrations[]; /* shape (migration_count) */
extern const int migration_count;

#endif
