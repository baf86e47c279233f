/*
 * reader.h - the readers table: how a format is recognised and opened. For readers only.
 *
 * To add a format: one new file that defines a `const struct reader`, and one line in the table
 * in reader.c.
 *
 * A reader's open() makes a struct recording whose first member is this header's struct, fills
 * `info` from `arena`, and returns it; recording.c does the rest (roles, unique labels, range
 * checks of the callers, closing).
 */
#ifndef RECORDING_READER_H
#define RECORDING_READER_H

#include "base/arena.h"
#include "recording/recording.h"

struct recording_ops {
    /* Decodes samples [first, first + count), already checked to lie inside the channel. */
    int (*read)(const struct recording *recording, size_t channel, int64_t first, int64_t count,
                float *out, struct err *err);
    /* The same range's extremes, faster than by read(); NULL = recording.c uses read(). */
    int (*minmax)(const struct recording *recording, size_t channel, int64_t first, int64_t count,
                  float *low, float *high, struct err *err);
    /* Unmaps files and frees what is not in the arena (the struct itself is freed after). */
    void (*close)(struct recording *recording);
};

/* Readers embed this as their first member and are allocated with calloc. */
struct recording {
    const struct recording_ops *ops;
    struct arena arena;
    struct recording_info info;
    struct channel *channels; /* writable view of info.channels, until opening is over */
    const char **notes;       /* grown by recording_note() */
    size_t note_count, note_room;
};

struct reader {
    const char *name;     /* "edf" */
    const char *suffixes; /* for help: ".edf .bdf" */
    /* True when the path or its first bytes (up to 4096; fewer in a short file) say so. */
    bool (*recognise)(const char *path, const uint8_t *head, size_t size);
    int (*open)(const char *path, const struct reader_options *options,
                const struct file_space *files, struct recording **out, struct err *err);
};

extern const struct reader *const readers[]; /* NULL-terminated; asked in order */

/* Adds one line to info.notes. A note repeated for many channels or records is the reader's to
 * count and say once. */
MUST_CHECK int recording_note(struct recording *recording, struct err *err, const char *format, ...)
    PRINTF_LIKE(3, 4);

/* A copy of a text field in the arena, blanks and NULs around it removed. What is not UTF-8 is
 * taken as Latin-1, which is what makers write for micro and degree. NULL when out of memory. */
MUST_CHECK char *recording_text(struct arena *arena, const uint8_t *bytes, size_t size);

#endif
