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

static char *join(const char *folder, const char *name)
{
    struct str path = {0};
    str_putf(&path, "%s/%s", folder, name);
    if (!str_failed(&path))
        return path.text;
    str_free(&path);
    return NULL;
}

/* Files only: the program makes no folders inside an export. */
static void remove_folder(const char *path)
{
    DIR *listing = opendir(path);
    for (struct dirent *entry; listing && (entry = readdir(listing));) {
        char *file = join(path, entry->d_name);
        if (file && entry->d_name[0] != '.')
            (void)unlink(file);
        free(file);
    }
    if (listing)
        (void)closedir(listing);
    (void)rmdir(path);
}

static bool is_empty(const char *path)
{
    DIR *listing = opendir(path);
    bool empty = listing != NULL;
    for (struct dirent *entry; listing && (entry = readdir(listing));)
        empty &= strcmp(entry->d_name, ".") == 0 || strcmp(entry->d_name, "..") == 0;
    if (listing)
        (void)closedir(listing);
    return empty;
}

/* May the target be replaced? */
static int check_target(const char *path, struct err *err)
{
    struct stat state;
    if (stat(path, &state) < 0)
        return errno == ENOENT ? ERR_OK : err_errno(err, path, "look at it");
    if (!S_ISDIR(state.st_mode))
        return err_set(err, ERR_CONFLICT, "%s: is a file; name a folder", path);
    char *provenance = join(path, "provenance.json");
    bool earlier = provenance && access(provenance, F_OK) == 0;
    free(provenance);
    if (earlier || is_empty(path))
        return ERR_OK;
    return err_set(err, ERR_CONFLICT,
                   "%s: holds files that are no earlier export; name another folder", path);
}

int folder_open(struct folder *folder, const char *path, struct err *err)
{
    struct folder made = {0};
    struct str name = {0};
    int failed = check_target(path, err);
    if (failed)
        return failed;
    size_t length = strlen(path);
    while (length > 1 && path[length - 1] == '/')
        length--;
    made.path = strndup(path, length);
    str_put_n(&name, path, length);
    str_put(&name, ".part-XXXXXX");
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
