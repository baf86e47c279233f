/*
 * faulty_vfs.c - SQLite's own file layer with failures put in between.
 */
#include "robustness/faulty_vfs.h"

#include <sqlite3.h>
#include <stdlib.h>

static sqlite3_vfs faulty;
static sqlite3_vfs *real;
int faulty_at, faulty_calls;
bool faulty_lasting;

struct faulty_file {
    sqlite3_file base;
    sqlite3_file *real;
};

static bool fails(void)
{
    int at = __atomic_load_n(&faulty_at, __ATOMIC_SEQ_CST);
    int call = __atomic_add_fetch(&faulty_calls, 1, __ATOMIC_SEQ_CST);
    return at > 0 && (call == at || (faulty_lasting && call > at));
}

static sqlite3_file *under(sqlite3_file *file)
{
    return ((struct faulty_file *)(void *)file)->real;
}

static int f_close(sqlite3_file *file)
{
    int code = under(file)->pMethods->xClose(under(file));
    free(under(file));
    return code;
}

static int f_read(sqlite3_file *file, void *to, int size, sqlite3_int64 at)
{
    return fails() ? SQLITE_IOERR_READ : under(file)->pMethods->xRead(under(file), to, size, at);
}

static int f_write(sqlite3_file *file, const void *from, int size, sqlite3_int64 at)
{
    return fails() ? SQLITE_IOERR_WRITE
                   : under(file)->pMethods->xWrite(under(file), from, size, at);
}

static int f_truncate(sqlite3_file *file, sqlite3_int64 size)
{
    return fails() ? SQLITE_IOERR_TRUNCATE : under(file)->pMethods->xTruncate(under(file), size);
}

static int f_sync(sqlite3_file *file, int flags)
{
    return fails() ? SQLITE_IOERR_FSYNC : under(file)->pMethods->xSync(under(file), flags);
}

static int f_size(sqlite3_file *file, sqlite3_int64 *size)
{
    return under(file)->pMethods->xFileSize(under(file), size);
}

static int f_lock(sqlite3_file *file, int level)
{
    return fails() ? SQLITE_IOERR_LOCK : under(file)->pMethods->xLock(under(file), level);
}

static int f_unlock(sqlite3_file *file, int level)
{
    return under(file)->pMethods->xUnlock(under(file), level);
}

static int f_reserved(sqlite3_file *file, int *out)
{
    return under(file)->pMethods->xCheckReservedLock(under(file), out);
}

static int f_control(sqlite3_file *file, int op, void *argument)
{
    return under(file)->pMethods->xFileControl(under(file), op, argument);
}

static int f_sector(sqlite3_file *file)
{
    return under(file)->pMethods->xSectorSize(under(file));
}

static int f_device(sqlite3_file *file)
{
    return under(file)->pMethods->xDeviceCharacteristics(under(file));
}

static int f_shm_map(sqlite3_file *file, int page, int size, int extend, void volatile **out)
{
    return fails() ? SQLITE_IOERR_SHMMAP
                   : under(file)->pMethods->xShmMap(under(file), page, size, extend, out);
}

static int f_shm_lock(sqlite3_file *file, int offset, int n, int flags)
{
    /* Giving a lock back cannot fail. */
    return (flags & SQLITE_SHM_LOCK) && fails()
               ? SQLITE_IOERR_SHMLOCK
               : under(file)->pMethods->xShmLock(under(file), offset, n, flags);
}

static void f_shm_barrier(sqlite3_file *file)
{
    under(file)->pMethods->xShmBarrier(under(file));
}

static int f_shm_unmap(sqlite3_file *file, int remove)
{
    return under(file)->pMethods->xShmUnmap(under(file), remove);
}

static const sqlite3_io_methods methods = {
    .iVersion = 2,
    .xClose = f_close,
    .xRead = f_read,
    .xWrite = f_write,
    .xTruncate = f_truncate,
    .xSync = f_sync,
    .xFileSize = f_size,
    .xLock = f_lock,
    .xUnlock = f_unlock,
    .xCheckReservedLock = f_reserved,
    .xFileControl = f_control,
    .xSectorSize = f_sector,
    .xDeviceCharacteristics = f_device,
    .xShmMap = f_shm_map,
    .xShmLock = f_shm_lock,
    .xShmBarrier = f_shm_barrier,
    .xShmUnmap = f_shm_unmap,
};

static int f_open(sqlite3_vfs *vfs, const char *name, sqlite3_file *file, int flags, int *out)
{
    (void)vfs;
    struct faulty_file *made = (struct faulty_file *)(void *)file;
    made->base.pMethods = NULL;
    if (fails())
        return SQLITE_CANTOPEN;
    made->real = calloc(1, (size_t)real->szOsFile);
    int code = real->xOpen(real, name, made->real, flags, out);
    if (code == SQLITE_OK)
        made->base.pMethods = &methods;
    else
        free(made->real);
    return code;
}

void faulty_install(void)
{
    real = sqlite3_vfs_find(NULL);
    faulty = *real;
    faulty.szOsFile = sizeof(struct faulty_file);
    faulty.zName = "faulty";
    faulty.xOpen = f_open;
    faulty.pNext = NULL;
    (void)sqlite3_vfs_register(&faulty, 1);
}
