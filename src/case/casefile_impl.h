/*
 * casefile_impl.h - what an open case is made of. For case/ alone.
 */
#ifndef CASE_CASEFILE_IMPL_H
#define CASE_CASEFILE_IMPL_H

#include "base/arena.h"
#include "base/str.h"
#include "case/casefile.h"
#include "trace/channel_trace.h"

/* One loaded recording and its channels as traces. */
struct loaded {
    struct attached attached;
    struct recording *recording; /* NULL when it has a problem */
    struct trace **traces;       /* shape (info->channel_count) */
    /* What stands for each of them in the case: itself, what it begins when later parts of its
     * source go on with it, or NULL when it is such a later part. */
    const struct trace **shown;
    const char *source; /* of a recording that was streamed; "" */
    char digest[DIGEST_TEXT_SIZE];
    char problem[320];
    struct arena clock_arena; /* pieces of attached.map, and source */
};

/* One answered request, kept for the next time it is asked. */
struct kept {
    char *key;
    struct derived derived;
};

struct casefile {
    char *path, *name;
    struct store *store; /* NULL for a bare recording */
    struct codebook *codebook;
    int64_t epoch_civil_ns;
    int utc_offset_s;
    struct loaded **loaded; /* shape (loaded_count) */
    size_t loaded_count, loaded_room;
    const struct trace **channels; /* all traces of all recordings, shape (channel_count) */
    size_t channel_count, channel_room;
    struct trace **joined; /* shape (joined_count) */
    size_t joined_count, joined_room;
    struct kept **kept; /* shape (kept_count) */
    size_t kept_count, kept_room;
};

/* Finds the file of a stored recording: where it was, or beside the case, by size and digest. On
 * success *path is the caller's to free. A file that is gone or changed is ERR_NOT_FOUND or
 * ERR_CONFLICT with a line that says what to do. */
MUST_CHECK int locate_recording(struct casefile *casefile, const struct stored_recording *stored,
                                char **path, struct err *err);

/* Size and time of last change of a recording: of all its files together, and of the latest. */
MUST_CHECK int recording_state(const char *path, int64_t *size, int64_t *modified_ns,
                               struct err *err);

/* BLAKE2b-256 of its file; of the digests of all its files, in order, when it has several. */
MUST_CHECK int recording_digest(const char *path, struct progress *progress,
                                char out[DIGEST_TEXT_SIZE], struct err *err);

/* Reader options as the store keeps them, one "name=value" a line, and back. The lists that
 * options_parse() makes live in `arena`. */
MUST_CHECK int options_text(const struct reader_options *options, struct str *out, struct err *err);
MUST_CHECK int options_parse(const char *text, struct arena *arena, struct reader_options *out,
                             struct err *err);

/* Joins the parts of each live source, once all recordings are loaded. */
MUST_CHECK int casefile_join(struct casefile *casefile, struct err *err);

/* Frees every kept derivation. */
void kept_free(struct casefile *casefile);

#endif
