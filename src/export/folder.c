/*
 * folder.c - replacing a folder in one step. Writes no file itself.
 */
#include "export/folder.h"

#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "base/file.h"
#include "base/str.h"
#include "export/writer.h"

static char *join(const char *folder, const char *name)
{
    struct str path = {0};
    str_putf(&path, "%s/%s", folder, name);
    if (!str_failed(&path))
        return path.text;
    str_free(&path);
    return NULL;
}

/* Only what writers write. A file that somebody put there meanwhile stays, and its folder too. */
static void remove_folder(const char *path)
{
    for (size_t i = 0; writers[i]; i++) {
        char *file = join(path, writers[i]->file);
        if (file)
            (void)unlink(file);
        free(file);
    }
    (void)rmdir(path);
}

static bool is_written(const char *name)
{
    for (size_t i = 0; writers[i]; i++) {
        if (strcmp(writers[i]->file, name) == 0)
            return true;
    }
    return strcmp(name, ".") == 0 || strcmp(name, "..") == 0;
}

/* Refuses a folder that holds anything but an export's files; *empty = it holds none of them. */
static int check_entries(const char *path, bool *empty, struct err *err)
{
    DIR *listing = opendir(path);
    int failed = listing ? ERR_OK : err_errno(err, path, "list it");
    *empty = true;
    for (struct dirent *entry; !failed && (entry = readdir(listing));) {
        *empty &= entry->d_name[0] == '.';
        if (!is_written(entry->d_name))
            failed = err_set(err, ERR_CONFLICT,
                             "%s: holds %s, which no export wrote; move it or name another folder",
                             path, entry->d_name);
    }
    if (listing)
        (void)closedir(listing);
    return failed;
}

/* May the target be replaced? */
static int check_target(const char *path, struct err *err)
{
    struct stat state;
    if (stat(path, &state) < 0)
        return errno == ENOENT ? ERR_OK : err_errno(err, path, "look at it");
    if (!S_ISDIR(state.st_mode))
        return err_set(err, ERR_CONFLICT, "%s: is a file; name a folder", path);
    bool empty;
    int failed = check_entries(path, &empty, err);
    if (failed || empty)
        return failed;
    char *provenance = join(path, "provenance.json");
    bool earlier = provenance && provenance_is_ours(provenance);
    free(provenance);
    return earlier
               ? ERR_OK
               : err_set(err, ERR_CONFLICT,
                         "%s: holds files that are no earlier export; name another folder", path);
}

/* Where the folder really is, so that a link to it is kept; without slashes at the end. */
static char *real_path(const char *path)
{
    char *real = realpath(path, NULL);
    size_t length = strlen(path);
    while (length > 1 && path[length - 1] == '/')
        length--;
    return real ? real : strndup(path, length);
}

int folder_open(struct folder *folder, const char *path, struct err *err)
{
    struct folder made = {0};
    struct str name = {0};
    int failed = check_target(path, err);
    if (failed)
        return failed;
    made.path = real_path(path);
    str_putf(&name, "%s.part-XXXXXX", made.path ? made.path : "");
    if (!made.path || str_failed(&name))
        failed = err_memory(err, path);
    else if (!mkdtemp(name.text))
        failed = err_errno(err, path, "make a folder beside it");
    if (failed) {
        str_free(&name);
        free(made.path);
        return failed;
    }
    made.temporary = name.text;
    *folder = made;
    return ERR_OK;
}

char *folder_file(const struct folder *folder, const char *name)
{
    return join(folder->temporary, name);
}

static void release(struct folder *folder)
{
    free(folder->path);
    free(folder->temporary);
    *folder = (struct folder){0};
}

/* Exchanges the two names where the file system can; where it cannot, the old folder steps aside
 * first, and comes back when the new one cannot take its place. */
static int put_in_place(const struct folder *folder, struct err *err)
{
    if (rename(folder->temporary, folder->path) == 0)
        return ERR_OK;
    if (errno != ENOTEMPTY && errno != EEXIST)
        return err_errno(err, folder->path, "put the export in place");
    if (renameat2(AT_FDCWD, folder->temporary, AT_FDCWD, folder->path, RENAME_EXCHANGE) == 0) {
        remove_folder(folder->temporary);
        return ERR_OK;
    }
    char *aside = join(folder->temporary, "");
    int failed = aside ? ERR_OK : err_memory(err, folder->path);
    if (!failed)
        (void)memcpy(aside + strlen(aside) - 1, "~", 2);
    if (!failed && rename(folder->path, aside) < 0)
        failed = err_errno(err, folder->path, "move the earlier export aside");
    if (!failed && rename(folder->temporary, folder->path) < 0) {
        failed = err_errno(err, folder->path, "put the export in place");
        (void)rename(aside, folder->path);
    }
    if (!failed)
        remove_folder(aside);
    free(aside);
    return failed;
}

int folder_commit(struct folder *folder, struct err *err)
{
    int failed = folder_sync(folder->temporary, err);
    if (!failed)
        failed = put_in_place(folder, err);
    if (failed) {
        folder_discard(folder);
        return failed;
    }
    char *parent = path_beside(folder->path, ".");
    failed = parent ? folder_sync(parent, err) : err_memory(err, folder->path);
    free(parent);
    release(folder);
    return failed;
}

void folder_discard(struct folder *folder)
{
    if (!folder->temporary)
        return;
    remove_folder(folder->temporary);
    release(folder);
}
