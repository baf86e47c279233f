/*
 * locate.c - finding the file of an attached recording again, and telling a moved file from a
 * changed one. Reads digests only when size or time of last change say that it must.
 */
#include <dirent.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>

#include "case/casefile_impl.h"

static int file_state(const char *path, int64_t *size, int64_t *modified_ns, struct err *err)
{
    struct stat stat_now;
    if (stat(path, &stat_now) < 0)
        return err_errno(err, path, "find it");
    int64_t changed = (int64_t)stat_now.st_mtim.tv_sec * NS_PER_S + stat_now.st_mtim.tv_nsec;
    *size += stat_now.st_size;
    *modified_ns = changed > *modified_ns ? changed : *modified_ns;
    return ERR_OK;
}

/* A WFDB header names further files; everything else is one file. *out is NULL for those. */
static int open_parts(const char *path, struct recording **out, struct err *err)
{
    static const struct reader_options no_options = {0};
    *out = NULL;
    return path_has_suffix(path, ".hea") ? recording_open(path, &no_options, out, err) : ERR_OK;
}

int recording_state(const char *path, int64_t *size, int64_t *modified_ns, struct err *err)
{
    struct recording *recording = NULL;
    *size = 0;
    *modified_ns = INT64_MIN;
    int failed = file_state(path, size, modified_ns, err);
    if (!failed)
        failed = open_parts(path, &recording, err);
    if (failed || !recording)
        return failed;
    const struct recording_info *info = recording_info(recording);
    for (size_t i = 0; i < info->part_count && !failed; i++)
        failed = file_state(info->parts[i], size, modified_ns, err);
    recording_close(recording);
    return failed;
}

int recording_digest(const char *path, struct progress *progress, char out[DIGEST_TEXT_SIZE],
                     struct err *err)
{
    struct recording *recording = NULL;
    int failed = digest_file(path, progress, out, err);
    if (!failed)
        failed = open_parts(path, &recording, err);
    if (failed || !recording)
        return failed;
    const struct recording_info *info = recording_info(recording);
    struct digester digester;
    uint8_t digest[DIGEST_SIZE];
    digester_begin(&digester);
    digester_add(&digester, out, DIGEST_TEXT_SIZE);
    for (size_t i = 0; i < info->part_count && !failed; i++) {
        failed = digest_file(info->parts[i], progress, out, err);
        digester_add(&digester, out, DIGEST_TEXT_SIZE);
    }
    digester_end(&digester, digest);
    recording_close(recording);
    digest_text(digest, out);
    return failed;
}

/* Is the file at `path` the stored one? The store is told where and when it was seen. */
static bool is_it(struct casefile *casefile, const struct stored_recording *stored,
                  const char *path)
{
    int64_t size = 0, modified_ns = 0;
    char digest[DIGEST_TEXT_SIZE];
    if (recording_state(path, &size, &modified_ns, NULL) || size != stored->size)
        return false;
    if (modified_ns == stored->modified_ns && strcmp(path, stored->path) == 0)
        return true;
    if (recording_digest(path, NULL, digest, NULL) || strcmp(digest, stored->digest) != 0)
        return false;
    /* Only saves the next opening a digest; where it cannot be kept, it is taken again. */
    int kept = !store_writable(casefile->store) ||
               store_recording_found(casefile->store, stored->id, path, modified_ns, NULL);
    (void)kept;
    return true;
}

/* Any file in the case's folder of the right size and digest. */
static char *search_beside(struct casefile *casefile, const struct stored_recording *stored)
{
    char *folder = path_beside(casefile->path, ".");
    DIR *listing = folder ? opendir(folder) : NULL;
    free(folder);
    char *found = NULL;
    for (struct dirent *entry; listing && !found && (entry = readdir(listing));) {
        char *path = path_beside(casefile->path, entry->d_name);
        struct stat state;
        /* Not the case itself: closing it once more would drop the database's locks on it. */
        bool own = path && strcmp(path, casefile->path) == 0;
        if (path && !own && stat(path, &state) == 0 && S_ISREG(state.st_mode) &&
            is_it(casefile, stored, path))
            found = path;
        else
            free(path);
    }
    if (listing)
        (void)closedir(listing);
    return found;
}

static int changed(const char *path, struct err *err)
{
    return err_set(err, ERR_CONFLICT,
                   "%s: changed since it was attached (its digest differs); put the original back, "
                   "or attach the new file as another recording",
                   path);
}

int locate_recording(struct casefile *casefile, const struct stored_recording *stored, char **path,
                     struct err *err)
{
    int64_t size, modified_ns;
    if (is_it(casefile, stored, stored->path)) {
        *path = strdup(stored->path);
        return *path ? ERR_OK : err_memory(err, stored->path);
    }
    char *found = search_beside(casefile, stored);
    if (found) {
        *path = found;
        return ERR_OK;
    }
    if (recording_state(stored->path, &size, &modified_ns, NULL) == ERR_OK)
        return changed(stored->path, err);
    char *beside = path_beside(casefile->path, path_name(stored->path));
    bool there = beside && recording_state(beside, &size, &modified_ns, NULL) == ERR_OK;
    int failed = there ? changed(beside, err) : ERR_OK;
    free(beside);
    if (failed)
        return failed;
    return err_set(err, ERR_NOT_FOUND,
                   "%s: not there any more; put it back, or beside the case under any name",
                   stored->path);
}
