/*
 * second_place.c - writing the lines. Reading them back is in second_place_take.c.
 */
#include "store/second_place.h"

#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "base/str.h"
#include "store/second_place_impl.h"

struct second_place {
    char *folder, *path, *case_path;
    struct live_session session;
    int fd;     /* -1: no file yet */
    off_t size; /* of what is known to be whole */
};

int second_place_folder(const char *case_id, struct str *out, struct err *err)
{
    const char *state = getenv("XDG_STATE_HOME"), *home = getenv("HOME");
    if (state && *state == '/')
        str_putf(out, "%s/incisura/unsaved/%s", state, case_id);
    else if (home && *home == '/')
        str_putf(out, "%s/.local/state/incisura/unsaved/%s", home, case_id);
    else
        return err_set(err, ERR_IO,
                       "no second place for marks: neither XDG_STATE_HOME nor HOME "
                       "names a folder");
    return str_failed(out) ? err_memory(err, "a path") : ERR_OK;
}

int second_place_new(const char *case_id, const char *case_path, const struct live_session *session,
                     struct second_place **out, struct err *err)
{
    struct str folder = {0}, path = {0};
    struct second_place *made = calloc(1, sizeof *made);
    int failed = made ? second_place_folder(case_id, &folder, err) : err_memory(err, case_path);
    if (!failed)
        str_putf(&path, "%s/%s" SECOND_PLACE_SUFFIX, str_text(&folder), session->uid);
    char *copy = failed ? NULL : strdup(case_path);
    if (!failed && (!copy || str_failed(&path)))
        failed = err_memory(err, case_path);
    if (failed) {
        str_free(&folder);
        str_free(&path);
        free(copy);
        free(made);
        return failed;
    }
    *made = (struct second_place){folder.text, path.text, copy, *session, -1, 0};
    *out = made;
    return ERR_OK;
}

void second_place_free(struct second_place *place)
{
    if (!place)
        return;
    if (place->fd >= 0)
        (void)close(place->fd); /* every line was synced when it was put */
    free(place->folder);
    free(place->path);
    free(place->case_path);
    free(place);
}

const char *second_place_path(const struct second_place *place)
{
    return place->path;
}

/* mkdir -p, for this person alone. */
static int make_folders(const char *folder, struct err *err)
{
    char *path = strdup(folder);
    if (!path)
        return err_memory(err, folder);
    int failed = ERR_OK;
    for (char *at = path + 1; !failed && at; at++) {
        at = strchr(at, '/');
        if (at)
            *at = '\0';
        if (mkdir(path, 0700) < 0 && errno != EEXIST)
            failed = err_errno(err, path, "make the folder");
        if (!at)
            break;
        *at = '/';
    }
    free(path);
    return failed;
}

static int write_at(struct second_place *place, const char *text, size_t size, struct err *err)
{
    for (size_t done = 0; done < size;) {
        ssize_t wrote = pwrite(place->fd, text + done, size - done, place->size + (off_t)done);
        if (wrote < 0 && errno == EINTR)
            continue;
        if (wrote <= 0)
            return err_errno(err, place->path, "write");
        done += (size_t)wrote;
    }
    return fdatasync(place->fd) < 0 ? err_errno(err, place->path, "flush to disk") : ERR_OK;
}

/* One line: digest, blank, JSON. Half a line that a full disk left is overwritten by the next. */
static int put_line(struct second_place *place, json_t *json, struct err *err)
{
    uint8_t digest[DIGEST_SIZE];
    char digest_hex[DIGEST_TEXT_SIZE];
    struct str line = {0};
    char *text = json ? json_dumps(json, JSON_COMPACT) : NULL;
    json_decref(json);
    if (!text)
        return err_memory(err, "a change");
    digest_bytes(text, strlen(text), digest);
    digest_text(digest, digest_hex);
    str_putf(&line, "%s %s\n", digest_hex, text);
    free(text);
    int failed = str_failed(&line) ? err_memory(err, "a change")
                                   : write_at(place, line.text, line.length, err);
    if (!failed)
        place->size += (off_t)line.length;
    str_free(&line);
    return failed;
}

static int open_place(struct second_place *place, struct err *err)
{
    int failed = make_folders(place->folder, err);
    if (failed)
        return failed;
    place->fd = open(place->path, O_RDWR | O_CREAT | O_TRUNC | O_CLOEXEC, 0600);
    if (place->fd < 0)
        return err_errno(err, place->path, "create it");
    place->size = 0;
    json_t *session = session_to_json(&place->session);
    json_t *head = json_pack(
        "{s:s, s:o, s:o}", "case", place->case_path, "session", session, "epoch_civil_ns",
        place->session.epoch_civil_ns == NS_NONE ? json_null()
                                                 : json_integer(place->session.epoch_civil_ns));
    failed = put_line(place, head, err);
    if (!failed)
        failed = folder_sync(place->folder, err);
    if (failed) {
        (void)close(place->fd);
        place->fd = -1;
    }
    return failed;
}

int second_place_put(struct second_place *place, const struct live_change *change, struct err *err)
{
    int failed = place->fd < 0 ? open_place(place, err) : ERR_OK;
    if (failed)
        return failed;
    json_t *mark = mark_to_json(&change->mark);
    json_t *json = json_pack("{s:I, s:s, s:I, s:I, s:s, s:o}", "number", (json_int_t)change->number,
                             "kind", change->kind == LIVE_ADD ? "add" : "change", "of_number",
                             (json_int_t)change->of_number, "of_id", (json_int_t)change->of_id,
                             "why", change->why ? change->why : "", "mark", mark);
    return put_line(place, json, err);
}

int second_place_clear(struct second_place *place, struct err *err)
{
    if (place->fd < 0)
        return ERR_OK;
    if (unlink(place->path) < 0 && errno != ENOENT)
        return err_errno(err, place->path, "remove it");
    (void)close(place->fd); /* the file is gone: nothing to lose */
    place->fd = -1;
    /* The folder stays while other sessions have something in it. */
    (void)rmdir(place->folder);
    return ERR_OK;
}
