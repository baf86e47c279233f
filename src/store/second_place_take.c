/*
 * second_place_take.c - bringing changes from the second place into the case they belong to.
 */
#include <dirent.h>
#include <errno.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "store/second_place_impl.h"

/* One file being read. */
struct taking {
    struct store *store;
    struct live_session session;
    bool has_session;
    int64_t taken, damaged;
};

static int64_t json_time(const json_t *json)
{
    return json_is_integer(json) ? (int64_t)json_integer_value(json) : NS_NONE;
}

static const char *json_word(const json_t *object, const char *key)
{
    const char *text = json_string_value(json_object_get(object, key));
    return text ? text : "";
}

static int64_t json_number(const json_t *object, const char *key)
{
    return (int64_t)json_integer_value(json_object_get(object, key));
}

static void copy_word(const json_t *object, const char *key, char *out, size_t size)
{
    (void)snprintf(out, size, "%s", json_word(object, key));
}

static bool take_head(struct taking *taking, const json_t *json)
{
    const json_t *from = json_object_get(json, "session");
    struct live_session *to = &taking->session;
    if (!json_is_object(from))
        return false;
    copy_word(from, "uid", to->uid, sizeof to->uid);
    copy_word(from, "host", to->host, sizeof to->host);
    copy_word(from, "machine", to->machine, sizeof to->machine);
    copy_word(from, "boot_id", to->boot_id, sizeof to->boot_id);
    copy_word(from, "rater", to->rater, sizeof to->rater);
    to->pid = json_number(from, "pid");
    to->process_start = json_number(from, "process_start");
    to->begun_utc_ns = json_number(from, "begun_utc_ns");
    to->case_minus_boottime_ns = json_number(from, "case_minus_boottime_ns");
    to->tie_error_ns = json_number(from, "tie_error_ns");
    to->ended_utc_ns = NS_NONE;
    to->epoch_civil_ns = json_time(json_object_get(json, "epoch_civil_ns"));
    taking->has_session = true;
    return true;
}

/* The mark of a line; texts live as long as the JSON. */
static bool take_mark(const json_t *json, struct mark *out)
{
    const json_t *value = json_object_get(json, "value");
    *out = (struct mark){
        .code = json_word(json, "code"),
        .onset_ns = json_time(json_object_get(json, "onset_ns")),
        .until_ns = json_time(json_object_get(json, "until_ns")),
        .has_value = json_is_number(value),
        .value = json_number_value(value),
        .unit = json_word(json, "unit"),
        .route = json_word(json, "route"),
        .note = json_word(json, "note"),
        .source = MARK_LIVE,
        .rater = json_word(json, "rater"),
        .error_ns = json_number(json, "error_ns"),
        .stamp_clock = json_word(json, "stamp_clock"),
        .stamp_ns = json_time(json_object_get(json, "stamp_ns")),
        .stamp_utc_ns = json_time(json_object_get(json, "stamp_utc_ns")),
    };
    return *out->code && mark_state_from_name(json_word(json, "state"), &out->state);
}

static int take_change(struct taking *taking, const json_t *json, struct err *err)
{
    int64_t id;
    struct live_change change = {
        .number = json_number(json, "number"),
        .kind = strcmp(json_word(json, "kind"), "add") == 0 ? LIVE_ADD : LIVE_CHANGE,
        .of_number = json_number(json, "of_number"),
        .of_id = json_number(json, "of_id"),
        .why = json_word(json, "why"),
    };
    if (!taking->has_session || change.number <= 0 ||
        !take_mark(json_object_get(json, "mark"), &change.mark)) {
        taking->damaged++;
        return ERR_OK;
    }
    int failed = store_live_change(taking->store, &taking->session, &change, &id, err);
    taking->taken += !failed;
    return failed;
}

/* The JSON of "DIGEST JSON"; NULL when the line is not what was written. */
static json_t *read_line(const char *line, size_t length)
{
    enum { DIGITS = DIGEST_TEXT_SIZE - 1 };
    uint8_t digest[DIGEST_SIZE];
    char text[DIGEST_TEXT_SIZE];
    if (length < DIGITS + 2 || line[DIGITS] != ' ')
        return NULL;
    digest_bytes(line + DIGITS + 1, length - DIGITS - 1, digest);
    digest_text(digest, text);
    if (memcmp(text, line, DIGITS) != 0)
        return NULL;
    return json_loadb(line + DIGITS + 1, length - DIGITS - 1, 0, NULL);
}

/* What follows the last end of line is half a line that was never said to be kept. */
static int take_lines(struct taking *taking, const char *text, size_t size, struct err *err)
{
    int failed = ERR_OK;
    bool first = true;
    for (const char *end; !failed && (end = memchr(text, '\n', size)); first = false) {
        size_t length = (size_t)(end - text);
        json_t *json = read_line(text, length);
        if (!json || (first && !take_head(taking, json)))
            taking->damaged++;
        else if (!first)
            failed = take_change(taking, json, err);
        json_decref(json);
        text += length + 1;
        size -= length + 1;
        /* One that runs brings its own changes in. */
        if (first && taking->has_session && live_session_alive(&taking->session))
            return ERR_CANCELLED;
    }
    return failed;
}

static int put_away(const char *path, bool damaged, struct err *err)
{
    struct str kept = {0};
    if (!damaged)
        return unlink(path) < 0 ? err_errno(err, path, "remove it") : ERR_OK;
    str_putf(&kept, "%s.damaged", path);
    int failed = str_failed(&kept) ? err_memory(err, path) : ERR_OK;
    if (!failed && rename(path, str_text(&kept)) < 0)
        failed = err_errno(err, path, "rename it");
    str_free(&kept);
    return failed;
}

static int take_file(struct store *store, const char *path, int64_t *taken, int64_t *damaged,
                     struct err *err)
{
    struct taking taking = {.store = store};
    struct mapped mapped;
    int failed = disk_files.map(&disk_files, path, &mapped, err);
    if (failed)
        return failed;
    failed = take_lines(&taking, (const char *)mapped.data, mapped.size, err);
    disk_files.unmap(&disk_files, &mapped);
    if (failed == ERR_CANCELLED)
        return ERR_OK;
    if (!failed)
        failed = put_away(path, taking.damaged > 0, err);
    *taken += taking.taken;
    *damaged += taking.damaged;
    return failed;
}

/* Calls `each` for every file of the case in the second place. */
static int each_file(struct store *store,
                     int (*each)(struct store *store, const char *path, void *context,
                                 struct err *err),
                     void *context, struct err *err)
{
    char id[CASE_ID_SIZE];
    struct str folder = {0}, path = {0};
    int failed = store_case_id(store, id, err);
    /* Without a home there is no second place, and nothing in it. */
    if (failed || second_place_folder(id, &folder, NULL)) {
        str_free(&folder);
        return failed;
    }
    DIR *listing = opendir(str_text(&folder));
    for (struct dirent *entry; !failed && listing && (entry = readdir(listing));) {
        if (!path_has_suffix(entry->d_name, SECOND_PLACE_SUFFIX))
            continue;
        str_clear(&path);
        str_putf(&path, "%s/%s", str_text(&folder), entry->d_name);
        failed = str_failed(&path) ? err_memory(err, entry->d_name)
                                   : each(store, str_text(&path), context, err);
    }
    if (listing)
        (void)closedir(listing);
    (void)rmdir(str_text(&folder)); /* goes when it is empty */
    str_free(&path);
    str_free(&folder);
    return failed;
}

struct counts {
    int64_t taken, damaged;
};

static int take_each(struct store *store, const char *path, void *context, struct err *err)
{
    struct counts *counts = context;
    return take_file(store, path, &counts->taken, &counts->damaged, err);
}

int second_place_take(struct store *store, int64_t *taken, int64_t *damaged, struct err *err)
{
    struct counts counts = {0};
    int failed = each_file(store, take_each, &counts, err);
    *taken = counts.taken;
    *damaged = counts.damaged;
    return failed;
}

static int count_each(struct store *store, const char *path, void *context, struct err *err)
{
    (void)store;
    (void)path;
    (void)err;
    ++*(int64_t *)context;
    return ERR_OK;
}

int second_place_count(struct store *store, int64_t *out, struct err *err)
{
    *out = 0;
    return each_file(store, count_each, out, err);
}
