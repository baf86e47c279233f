/*
 * source_impl.h - a source's state, shared by naming and reading (source.c) and opening
 * (source_open.c).
 */
#ifndef RECORDING_SOURCE_IMPL_H
#define RECORDING_SOURCE_IMPL_H

#include <netdb.h>
#include <sys/types.h>

#include "recording/source.h"

enum source_kind { SOURCE_FIFO, SOURCE_SERIAL, SOURCE_TCP, SOURCE_STDIN, SOURCE_FILE };

struct source {
    enum source_kind kind;
    char *text;      /* as given, for errors */
    char *name;      /* path, device or host */
    char *port;      /* TCP; NULL otherwise */
    int baud;        /* serial */
    int fd;          /* -1: not open */
    bool met_writer; /* FIFO: somebody has written, so that an end is an end */
    dev_t device;    /* growing file: which one is open, and how far it is read */
    ino_t inode;
    off_t at;
    bool more; /* the last read of it gave all that there was room for */
    struct addrinfo *addresses, *next_address; /* TCP: of the name; still to be tried */
};

/* Is it a rate that serial lines have? */
bool baud_known(int baud);

/* Where all addresses have failed, or nothing is open, forgets what opening has kept. */
void source_forget_addresses(struct source *source);

#endif
