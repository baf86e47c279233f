/*
 * file.c - mapping files, writing them whole, digests. Knows no format.
 */
#include "base/file.h"

#include <errno.h>
#include <fcntl.h>
#include <sodium.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <strings.h>
#include <sys/mman.h>
#include <sys/stat.h>
#include <unistd.h>

enum { OUT_BUFFER = 1 << 18, DIGEST_STEP = 1 << 22 };

/* An open regular file and its size; a folder or a device is refused by name. */
static int open_regular(const char *path, int *fd, struct stat *stat, struct err *err)
{
    int opened = open(path, O_RDONLY | O_CLOEXEC | O_NONBLOCK);
    if (opened < 0)
        return err_errno(err, path, "open for reading");
    if (fstat(opened, stat) < 0) {
        int failed = err_errno(err, path, "read its size");
        (void)close(opened);
        return failed;
    }
    if (!S_ISREG(stat->st_mode)) {
        (void)close(opened);
        return err_set(err, ERR_IO, "%s: is %s, not a file; name a file", path,
                       S_ISDIR(stat->st_mode) ? "a folder" : "a device or pipe");
    }
    *fd = opened;
    return ERR_OK;
}

static int disk_map(const struct file_space *self, const char *path, struct mapped *out,
                    struct err *err)
{
    (void)self;
    int fd;
    struct stat stat;
    int failed = open_regular(path, &fd, &stat, err);
    if (failed)
        return failed;
    struct mapped made = {NULL, (size_t)stat.st_size, fd + 1};
    if (made.size > 0) {
        void *data = mmap(NULL, made.size, PROT_READ, MAP_SHARED, fd, 0);
        if (data == MAP_FAILED)
            failed = err_errno(err, path, "map into memory");
        else
            made.data = data;
    }
    if (failed)
        (void)close(fd);
    else
        *out = made;
    return failed;
}

static void disk_unmap(const struct file_space *self, struct mapped *mapped)
{
    (void)self;
    if (mapped->data)
        (void)munmap((void *)(uintptr_t)mapped->data, mapped->size);
    if (mapped->handle > 0)
        (void)close(mapped->handle - 1);
    *mapped = (struct mapped){0};
}

static int disk_copy(const struct file_space *self, const struct mapped *mapped, size_t at,
                     size_t size, uint8_t *out, struct err *err)
{
    (void)self;
    for (size_t done = 0; done < size;) {
        ssize_t got = pread(mapped->handle - 1, out + done, size - done, (off_t)(at + done));
        if (got < 0 && errno == EINTR)
            continue;
        if (got < 0)
            return err_errno(err, "recording", "read");
        if (got == 0)
            return err_set(err, ERR_IO, "recording: byte %zu is not there any more", at + done);
        done += (size_t)got;
    }
    return ERR_OK;
}

const struct file_space disk_files = {disk_map, disk_unmap, disk_copy};

static int memory_map(const struct file_space *self, const char *path, struct mapped *out,
                      struct err *err)
{
    const struct memory_files *space = (const struct memory_files *)(const void *)self;
    for (size_t i = 0; i < space->count; i++) {
        if (strcmp(space->files[i].path, path) == 0) {
            *out = (struct mapped){space->files[i].data, space->files[i].size, 0};
            return ERR_OK;
        }
    }
    return err_set(err, ERR_IO, "%s: cannot open for reading: no such file", path);
}

static void memory_unmap(const struct file_space *self, struct mapped *mapped)
{
    (void)self;
    *mapped = (struct mapped){0};
}

static int memory_copy(const struct file_space *self, const struct mapped *mapped, size_t at,
                       size_t size, uint8_t *out, struct err *err)
{
    (void)self;
    (void)err;
    memcpy(out, mapped->data + at, size);
    return ERR_OK;
}

void memory_files_init(struct memory_files *space, const struct memory_file *files, size_t count)
{
    *space = (struct memory_files){{memory_map, memory_unmap, memory_copy}, files, count};
}

char *path_beside(const char *path, const char *name)
{
    size_t folder = (size_t)(path_name(path) - path), length = strlen(name);
    char *made = malloc(folder + length + 1);
    if (!made)
        return NULL;
    memcpy(made, path, folder);
    memcpy(made + folder, name, length + 1);
    return made;
}

const char *path_name(const char *path)
{
    const char *slash = strrchr(path, '/');
    return slash ? slash + 1 : path;
}

bool path_has_suffix(const char *path, const char *suffix)
{
    size_t length = strlen(path), tail = strlen(suffix);
    return length >= tail && strcasecmp(path + length - tail, suffix) == 0;
}

int outfile_open(struct outfile *out, const char *path, struct err *err)
{
    struct outfile made = {.fd = -1};
    size_t length = strlen(path) + 16;
    made.path = strdup(path);
    made.temporary = malloc(length);
    made.buffer = malloc(OUT_BUFFER);
    int failed = ERR_OK;
    if (!made.path || !made.temporary || !made.buffer) {
        failed = err_memory(err, "opening a file for writing");
        goto out;
    }
    (void)snprintf(made.temporary, length, "%s.part-XXXXXX", path);
    made.fd = mkostemp(made.temporary, O_CLOEXEC);
    if (made.fd < 0) {
        failed = err_errno(err, path, "write beside it");
        goto out;
    }
    *out = made;
    return ERR_OK;
out:
    free(made.path);
    free(made.temporary);
    free(made.buffer);
    return failed;
}

static void flush(struct outfile *out)
{
    for (size_t done = 0; done < out->used && !out->failed;) {
        ssize_t wrote = write(out->fd, out->buffer + done, out->used - done);
        if (wrote > 0)
            done += (size_t)wrote;
        else if (errno != EINTR) {
            (void)err_errno(&out->why, out->path, "write");
            out->failed = true;
        }
    }
    out->used = 0;
}

void outfile_write(struct outfile *out, const void *data, size_t size)
{
    const uint8_t *from = data;
    while (size > 0 && !out->failed) {
        size_t step = OUT_BUFFER - out->used;
        if (step > size)
            step = size;
        memcpy(out->buffer + out->used, from, step);
        out->used += step;
        from += step;
        size -= step;
        if (out->used == OUT_BUFFER)
            flush(out);
    }
}

static void release(struct outfile *out)
{
    free(out->path);
    free(out->temporary);
    free(out->buffer);
    *out = (struct outfile){.fd = -1};
}

int outfile_commit(struct outfile *out, struct err *err)
{
    flush(out);
    if (!out->failed && fsync(out->fd) < 0) {
        (void)err_errno(&out->why, out->path, "flush to disk");
        out->failed = true;
    }
    if (close(out->fd) < 0 && !out->failed) {
        (void)err_errno(&out->why, out->path, "close");
        out->failed = true;
    }
    out->fd = -1;
    if (!out->failed && rename(out->temporary, out->path) < 0) {
        (void)err_errno(&out->why, out->path, "put in place");
        out->failed = true;
    }
    if (out->failed) {
        int code = err_set(err, out->why.code, "%s", out->why.text);
        (void)unlink(out->temporary);
        release(out);
        return code;
    }
    char *folder = path_beside(out->path, ".");
    int failed = folder ? folder_sync(folder, err) : err_memory(err, "closing a file");
    free(folder);
    release(out);
    return failed;
}

void outfile_discard(struct outfile *out)
{
    if (!out->path)
        return;
    if (out->fd >= 0)
        (void)close(out->fd);
    (void)unlink(out->temporary);
    release(out);
}

int folder_sync(const char *path, struct err *err)
{
    int fd = open(path, O_RDONLY | O_DIRECTORY | O_CLOEXEC);
    if (fd < 0)
        return err_errno(err, path, "open the folder");
    /* Some file systems cannot sync a folder and say EINVAL: then the rename is as safe as they
     * make it. */
    int failed = fsync(fd) < 0 && errno != EINVAL ? err_errno(err, path, "flush the folder") : 0;
    (void)close(fd);
    return failed;
}

/* Picks the fastest implementation for this processor; calling it again costs nothing. Without it
 * (-1: no source of randomness, which a digest does not need) the portable one is used. */
static void ready(void)
{
    if (sodium_init() < 0)
        return;
}

static crypto_generichash_state *state_of(struct digester *digester)
{
    _Static_assert(sizeof(crypto_generichash_state) <= sizeof digester->state,
                   "digester too small");
    return (crypto_generichash_state *)(void *)digester->state;
}

/* With these sizes and no key, the calls below cannot fail. */
void digester_begin(struct digester *digester)
{
    ready();
    (void)crypto_generichash_init(state_of(digester), NULL, 0, DIGEST_SIZE);
}

void digester_add(struct digester *digester, const void *data, size_t size)
{
    (void)crypto_generichash_update(state_of(digester), data, size);
}

void digester_end(struct digester *digester, uint8_t out[DIGEST_SIZE])
{
    (void)crypto_generichash_final(state_of(digester), out, DIGEST_SIZE);
}

void digest_bytes(const void *data, size_t size, uint8_t out[DIGEST_SIZE])
{
    struct digester digester;
    digester_begin(&digester);
    digester_add(&digester, data, size);
    digester_end(&digester, out);
}

void digest_text(const uint8_t digest[DIGEST_SIZE], char out[DIGEST_TEXT_SIZE])
{
    (void)sodium_bin2hex(out, DIGEST_TEXT_SIZE, digest, DIGEST_SIZE);
}

int digest_file(const char *path, struct progress *progress, char out[DIGEST_TEXT_SIZE],
                struct err *err)
{
    int fd;
    struct stat stat;
    int failed = open_regular(path, &fd, &stat, err);
    if (failed)
        return failed;
    progress_total(progress, stat.st_size);
    uint8_t *buffer = malloc(DIGEST_STEP), digest[DIGEST_SIZE];
    struct digester digester;
    digester_begin(&digester);
    if (!buffer)
        failed = err_memory(err, "a digest");
    while (!failed) {
        ssize_t got = read(fd, buffer, DIGEST_STEP);
        if (got == 0)
            break;
        if (got < 0 && errno == EINTR)
            continue;
        if (got < 0)
            failed = err_errno(err, path, "read");
        else if (progress_cancelled(progress))
            failed = err_set(err, ERR_CANCELLED, "%s: stopped while reading", path);
        else
            digester_add(&digester, buffer, (size_t)got);
        progress_add(progress, got > 0 ? got : 0);
    }
    digester_end(&digester, digest);
    free(buffer);
    (void)close(fd);
    if (!failed)
        digest_text(digest, out);
    return failed;
}
