/*
 * err.h - the one error idiom of the program.
 *
 * A function that can fail returns int: 0 is success, anything else one of enum err_code, and
 * fills the caller's struct err with one line a person can act on: what happened, where (file,
 * line or byte), what to do. Outputs are untouched on failure unless the function says otherwise.
 *
 * The struct is caller-owned and of fixed size, so that running out of memory can be told too.
 * Nothing here prints, exits or allocates. Passing err = NULL is allowed and drops the text.
 */
#ifndef BASE_ERR_H
#define BASE_ERR_H

#define MUST_CHECK             __attribute__((warn_unused_result))
#define PRINTF_LIKE(fmt, args) __attribute__((format(printf, fmt, args)))

enum err_code {
    ERR_OK = 0,
    ERR_MEMORY,    /* allocation failed, or a size that cannot be represented */
    ERR_IO,        /* the operating system refused: open, read, write, sync, rename */
    ERR_FORMAT,    /* a file's content cannot be meant */
    ERR_USAGE,     /* the caller, or the person at the command line, asked wrongly */
    ERR_NOT_FOUND, /* a name that is not there: code, channel, derivation, mark */
    ERR_CONFLICT,  /* would contradict what is stored: duplicate, locked, changed file */
    ERR_NEWER,     /* written by a newer program */
    ERR_READ_ONLY, /* a change was asked of something opened for reading */
    ERR_CANCELLED, /* the caller's progress said stop */
};

struct err {
    int code; /* enum err_code; 0 when nothing failed */
    char text[512];
};

/* Sets code and text; returns code, so that `return err_set(...)` reads well. */
int err_set(struct err *err, int code, const char *format, ...) PRINTF_LIKE(3, 4);

/* Out of memory while doing `what`. Returns ERR_MEMORY. */
int err_memory(struct err *err, const char *what);

/* A system call failed on `path`: adds strerror(errno). Returns ERR_IO. */
int err_errno(struct err *err, const char *path, const char *what);

/* Puts "prefix: " in front of a text that is already set; returns err->code. */
int err_prefix(struct err *err, const char *format, ...) PRINTF_LIKE(2, 3);

#endif
