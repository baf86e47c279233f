/*
 * file.h - files as memory, and files that appear whole or not at all.
 *
 * Reading goes through a small virtual `struct file_space`, so that tests and fuzzers hand a
 * reader bytes from memory where the program hands it the disk. Writing goes through
 * `struct outfile`: bytes go to a temporary beside the target, and outfile_commit() syncs and
 * renames; anything less leaves no trace.
 */
#ifndef BASE_FILE_H
#define BASE_FILE_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "base/err.h"
#include "base/progress.h"

struct mapped {
    const uint8_t *data; /* read-only; NULL when size is 0 */
    size_t size;
    int handle; /* the space's own; disk: file descriptor + 1 */
};

/* Where names become bytes. `map` and `unmap` may be called from one thread at a time. */
struct file_space {
    int (*map)(const struct file_space *self, const char *path, struct mapped *out,
               struct err *err);
    void (*unmap)(const struct file_space *self, struct mapped *mapped);
    /* Copies bytes [at, at + size), which lie inside, without touching the map: for a few bytes
     * here and there in a large file a page fault each costs several times a read. */
    int (*copy)(const struct file_space *self, const struct mapped *mapped, size_t at, size_t size,
                uint8_t *out, struct err *err);
};

/* The real disk: mmap, read-only. A directory or an unreadable file is one line of error. */
extern const struct file_space disk_files;

/* Memory: `count` named buffers, for tests and fuzzers; names compare with the whole path. */
struct memory_file {
    const char *path;
    const uint8_t *data;
    size_t size;
};
struct memory_files {
    struct file_space space; /* set by memory_files_init */
    const struct memory_file *files;
    size_t count;
};
void memory_files_init(struct memory_files *space, const struct memory_file *files, size_t count);

/* The file `name` in the folder of `path` ("d/r.hea", "r.dat" gives "d/r.dat"). Caller frees;
 * NULL when out of memory. */
char *path_beside(const char *path, const char *name) MUST_CHECK;
/* The part after the last slash. */
const char *path_name(const char *path);
bool path_has_suffix(const char *path, const char *suffix); /* ASCII, any letter case */

struct outfile {
    char *path, *temporary;
    int fd;
    uint8_t *buffer;
    size_t used;
    bool failed;
    struct err why; /* the first failure */
};

/* Mode is 0600: what a case holds is about a patient. */
MUST_CHECK int outfile_open(struct outfile *out, const char *path, struct err *err);
/* Buffered; a failure is remembered and told by outfile_commit(). */
void outfile_write(struct outfile *out, const void *data, size_t size);
MUST_CHECK int outfile_commit(struct outfile *out, struct err *err);
/* Removes the temporary. Does nothing after a commit, or on a zeroed struct. */
void outfile_discard(struct outfile *out);

/* fsync of a folder, so that a rename in it survives a power cut. */
MUST_CHECK int folder_sync(const char *path, struct err *err);

/* BLAKE2b-256 (RFC 7693), as 64 lower-case hexadecimal digits. */
enum { DIGEST_SIZE = 32, DIGEST_TEXT_SIZE = 65 };
MUST_CHECK int digest_file(const char *path, struct progress *progress, char out[DIGEST_TEXT_SIZE],
                           struct err *err);
/* The same of bytes that come piece by piece. */
struct digester {
    _Alignas(64) uint8_t state[384];
};
void digester_begin(struct digester *digester);
void digester_add(struct digester *digester, const void *data, size_t size);
void digester_end(struct digester *digester, uint8_t out[DIGEST_SIZE]);
void digest_bytes(const void *data, size_t size, uint8_t out[DIGEST_SIZE]);
void digest_text(const uint8_t digest[DIGEST_SIZE], char out[DIGEST_TEXT_SIZE]);

#endif
