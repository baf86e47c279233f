/*
 * edf_repair.c - the record count of a file that was not closed, from its size. Decodes no sample.
 */
#include "recording/edf_repair.h"

#include <errno.h>
#include <fcntl.h>
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "base/array.h"
#include "base/ns.h"
#include "base/str.h"
#include "recording/edf_annotations.h"

enum {
    FIXED_BYTES = 256,
    SIGNAL_BYTES = 256,
    KIND_AT = 192 + 4, /* the C or D of "EDF+C" */
    COUNT_AT = 236,
    DURATION_AT = 244,
    SIGNALS_AT = 252,
    SIGNALS_MOST = 9999,
};

struct broken {
    const char *path;
    int fd;
    int64_t size;
    int64_t count; /* as the header says */
    int64_t record_ns;
    bool discontinuous;
    int64_t header_bytes, record_bytes;
    int64_t onset_at, onset_bytes; /* the annotation signal in a record; 0 bytes = there is none */
};

static int read_at(const struct broken *file, void *to, size_t size, int64_t at, struct err *err)
{
    for (size_t done = 0; done < size;) {
        ssize_t got = pread(file->fd, (char *)to + done, size - done, (off_t)at + (off_t)done);
        if (got < 0 && errno == EINTR)
            continue;
        if (got < 0)
            return err_errno(err, file->path, "read");
        if (got == 0)
            return err_set(err, ERR_FORMAT,
                           "%s: ends at byte %lld, inside its header; nothing of "
                           "it can be recovered",
                           file->path, (long long)at + (long long)done);
        done += (size_t)got;
    }
    return ERR_OK;
}

static bool number_at(const uint8_t *from, size_t size, int64_t least, int64_t most, int64_t *out)
{
    char text[16] = "";
    memcpy(text, from, size);
    return integer_parse(text, out) && *out >= least && *out <= most;
}

static int read_signals(struct broken *file, int64_t signals, int width, struct err *err)
{
    void *memory = NULL;
    size_t size = (size_t)(signals * SIGNAL_BYTES);
    int failed = array_new(&memory, size, 1, err);
    if (failed)
        return failed;
    const uint8_t *fields = memory;
    failed = read_at(file, memory, size, FIXED_BYTES, err);
    for (int64_t i = 0; i < signals && !failed; i++) {
        int64_t samples;
        if (!number_at(fields + 216 * signals + 8 * i, 8, 0, 99999999, &samples)) {
            failed = err_set(err, ERR_FORMAT, "%s: signal %lld has no number of samples",
                             file->path, (long long)i + 1);
            break;
        }
        const char *label = (const char *)fields + 16 * i;
        if (file->onset_bytes == 0 && (strncmp(label, "EDF Annotations", 15) == 0 ||
                                       strncmp(label, "BDF Annotations", 15) == 0)) {
            file->onset_at = file->record_bytes;
            file->onset_bytes = samples * width;
        }
        file->record_bytes += samples * width;
    }
    free(memory);
    if (!failed && file->record_bytes == 0)
        failed = err_set(err, ERR_FORMAT, "%s: its records are empty", file->path);
    return failed;
}

static int read_header(struct broken *file, struct err *err)
{
    uint8_t head[FIXED_BYTES];
    int64_t signals;
    int failed = read_at(file, head, sizeof head, 0, err);
    if (failed)
        return failed;
    bool bdf = memcmp(head,
                      "\xFF"
                      "BIOSEMI",
                      8) == 0;
    if ((!bdf && memcmp(head, "0       ", 8) != 0) ||
        !number_at(head + COUNT_AT, 8, -1, 99999999, &file->count) ||
        !number_at(head + SIGNALS_AT, 4, 1, SIGNALS_MOST, &signals))
        return err_set(err, ERR_FORMAT, "%s: is not an EDF or BDF file", file->path);
    char seconds[9] = "";
    double duration;
    memcpy(seconds, head + DURATION_AT, 8);
    file->record_ns = number_parse(seconds, &duration) ? ns_from_s(duration) : 0;
    file->discontinuous = memcmp(head + KIND_AT - 1, "+D", 2) == 0;
    file->header_bytes = FIXED_BYTES + signals * SIGNAL_BYTES;
    return file->count >= 0 ? ERR_OK : read_signals(file, signals, bdf ? 3 : 2, err);
}

/* The onset that a record states; false when it states none. */
static int read_onset(const struct broken *file, int64_t record, uint8_t *room, bool *stated,
                      int64_t *onset_ns, struct err *err)
{
    size_t size = (size_t)file->onset_bytes;
    int64_t at = file->header_bytes + record * file->record_bytes + file->onset_at;
    int failed = read_at(file, room, size, at, err);
    if (!failed)
        *stated = tal_record_onset(room, size, onset_ns);
    return failed;
}

/* Drops records at the end that state no onset, and sees whether the others follow one another
 * without a gap. */
static int walk(const struct broken *file, int64_t *records, bool *gapless, struct err *err)
{
    void *room = NULL;
    bool stated = false, even = file->record_ns > 0;
    int64_t left = *records, first_ns = 0, onset_ns = 0;
    int failed = array_new(&room, (size_t)file->onset_bytes, 1, err);
    while (!failed && left > 0 && !stated) {
        failed = read_onset(file, left - 1, room, &stated, &onset_ns, err);
        left -= !stated;
    }
    for (int64_t i = 0; !failed && i < left && even; i++) {
        failed = read_onset(file, i, room, &stated, &onset_ns, err);
        first_ns = i == 0 ? onset_ns : first_ns;
        even = stated && onset_ns == first_ns + i * file->record_ns;
    }
    free(room);
    if (failed)
        return failed;
    *records = left;
    *gapless = even;
    return ERR_OK;
}

static int put_at(const struct broken *file, const char *text, size_t size, off_t at,
                  struct err *err)
{
    ssize_t wrote = pwrite(file->fd, text, size, at);
    if (wrote >= 0 && wrote < (ssize_t)size)
        return err_set(err, ERR_IO, "%s: its header was not written whole; try again", file->path);
    return wrote < 0 ? err_errno(err, file->path, "write its record count") : ERR_OK;
}

/* The count last: until it stands the file is one to be repaired. */
static int complete(const struct broken *file, struct err *err)
{
    char count[24];
    bool gapless = false;
    int64_t records = (file->size - file->header_bytes) / file->record_bytes;
    int failed = file->onset_bytes > 0 ? walk(file, &records, &gapless, err) : ERR_OK;
    if (failed)
        return failed;
    (void)snprintf(count, sizeof count, "%-8lld", (long long)records);
    if (ftruncate(file->fd, (off_t)(file->header_bytes + records * file->record_bytes)) < 0)
        return err_errno(err, file->path, "cut off its last, partial record");
    if (file->discontinuous && gapless)
        failed = put_at(file, "C", 1, KIND_AT, err);
    if (!failed)
        failed = put_at(file, count, 8, COUNT_AT, err);
    if (!failed && fsync(file->fd) < 0)
        failed = err_errno(err, file->path, "flush to disk");
    return failed;
}

int edf_repair(const char *path, struct err *err)
{
    struct broken file = {.path = path, .fd = open(path, O_RDWR | O_CLOEXEC)};
    struct stat status;
    if (file.fd < 0)
        return err_errno(err, path, "open it for repair");
    int failed = fstat(file.fd, &status) < 0 ? err_errno(err, path, "look at it") : ERR_OK;
    if (!failed) {
        file.size = status.st_size;
        failed = read_header(&file, err);
    }
    if (!failed && file.count < 0)
        failed = complete(&file, err);
    if (close(file.fd) < 0 && !failed)
        failed = err_errno(err, path, "close it");
    return failed;
}
