/*
 * recording.c - what all readers share: choosing one, roles, unique labels, range checks, extremes
 * by reading, notes. Decodes no format.
 */
#include "recording/recording.h"

#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "base/str.h"
#include "dsp/stats.h"
#include "recording/reader.h"

enum { HEAD_SIZE = 4096, SCAN_STEP = 4096, WHY_SIZE = 160 };

int recording_note(struct recording *recording, struct err *err, const char *format, ...)
{
    char text[400];
    va_list args;
    va_start(args, format);
    (void)vsnprintf(text, sizeof text, format, args);
    va_end(args);
    char *kept = arena_string(&recording->arena, text);
    if (!kept)
        return err_memory(err, "a note");
    int failed = array_reserve((void **)&recording->notes, &recording->note_room,
                               recording->note_count + 1, sizeof *recording->notes, err);
    if (failed)
        return failed;
    recording->notes[recording->note_count++] = kept;
    recording->info.notes = recording->notes;
    recording->info.note_count = recording->note_count;
    return ERR_OK;
}

char *recording_text(struct arena *arena, const uint8_t *bytes, size_t size)
{
    while (size > 0 && (bytes[size - 1] == ' ' || bytes[size - 1] == '\0'))
        size--;
    while (size > 0 && *bytes == ' ') {
        bytes++;
        size--;
    }
    size_t length = strnlen((const char *)bytes, size);
    if (utf8_valid((const char *)bytes, length))
        return arena_string_n(arena, (const char *)bytes, length);
    char *text = arena_alloc(arena, 2 * length + 1, 1), *to = text;
    for (size_t i = 0; text && i < length; i++) {
        char wide[4];
        size_t wrote = utf8_put(wide, bytes[i]);
        memcpy(to, wide, wrote);
        to += wrote;
    }
    return text;
}

/* The part after "LABEL=" of the last entry for this label; NULL when there is none. Used entries
 * are counted, so that one that fits no channel can be told. */
static const char * override(const char *const *entries, size_t count, const char *label,
                             size_t *used)
{
    size_t length = strlen(label);
    const char *value = NULL;
    for (size_t i = 0; i < count; i++) {
        if (strncmp(entries[i], label, length) == 0 && entries[i][length] == '=') {
            value = entries[i] + length + 1;
            (*used)++;
        }
    }
    return value;
}

static int set_role(struct recording *recording, struct channel *channel,
                    const struct reader_options *options, size_t *used, struct err *err)
{
    char why[WHY_SIZE] = "";
    const char *asked = override(options->roles, options->role_count, channel->label, used);
    if (asked) {
        if (!role_from_name(asked, &channel->role))
            return err_set(err, ERR_USAGE, "--role %s=%s: no such role; `incisura help roles`",
                           channel->label, asked);
        channel->role_why = "asked for with --role";
        return ERR_OK;
    }
    channel->role = role_of_label(channel->label, channel->unit, why, sizeof why);
    channel->role_why = arena_string(&recording->arena, why);
    return channel->role_why ? ERR_OK : err_memory(err, "a role");
}

static bool label_taken(const struct channel *channels, size_t count, const char *label)
{
    for (size_t i = 0; i < count; i++) {
        if (strcmp(channels[i].label, label) == 0)
            return true;
    }
    return false;
}

/* The second channel of one label becomes "LABEL #2", and so on. `said` are the labels as they
 * were. */
static int make_unique(struct recording *recording, const char *const *said, size_t index,
                       struct err *err)
{
    struct channel *channels = recording->channels;
    size_t number = 1;
    for (size_t i = 0; i < index; i++)
        number += strcmp(said[i], said[index]) == 0;
    /* A file may have a channel that is called "LABEL #2" already. */
    while (number > 1 || label_taken(channels, index, channels[index].label)) {
        channels[index].label = arena_printf(&recording->arena, "%s #%zu", said[index], number);
        if (!channels[index].label)
            return err_memory(err, "a label");
        if (!label_taken(channels, index, channels[index].label))
            break;
        number++;
    }
    return ERR_OK;
}

static int make_all_unique(struct recording *recording, struct err *err)
{
    size_t count = recording->info.channel_count;
    void *memory = NULL;
    int failed = array_new(&memory, count, sizeof(const char *), err);
    const char **said = memory;
    for (size_t i = 0; i < count && !failed; i++)
        said[i] = recording->channels[i].label;
    for (size_t i = 0; i < count && !failed; i++)
        failed = make_unique(recording, said, i, err);
    free(memory);
    return failed;
}

static int set_start(struct recording *recording, const struct reader_options *options,
                     struct err *err)
{
    char start[TIME_TEXT_SIZE];
    if (options->start_civil_ns == 0)
        return ERR_OK;
    if (recording->info.start_civil_ns == NS_NONE) {
        recording->info.start_civil_ns = options->start_civil_ns;
        return ERR_OK;
    }
    ns_format_civil(recording->info.start_civil_ns, start);
    return err_set(err, ERR_USAGE, "%s: says itself that it starts at %s; leave --start away",
                   recording->info.path, start);
}

static int finish(struct recording *recording, const struct reader_options *options,
                  struct err *err)
{
    size_t units = 0, roles = 0;
    int failed = set_start(recording, options, err);
    if (!failed)
        failed = make_all_unique(recording, err);
    for (size_t i = 0; i < recording->info.channel_count && !failed; i++) {
        struct channel *channel = &recording->channels[i];
        const char *unit = override(options->units, options->unit_count, channel->label, &units);
        if (unit)
            channel->unit = arena_string(&recording->arena, unit);
        if (!failed && !channel->unit)
            failed = err_memory(err, "a unit");
        if (!failed)
            failed = set_role(recording, channel, options, &roles, err);
    }
    if (!failed && (units < options->unit_count || roles < options->role_count))
        failed = err_set(err, ERR_NOT_FOUND,
                         "%s: a --%s names a channel it does not have; `incisura inspect` lists "
                         "labels, write LABEL=VALUE",
                         recording->info.path, units < options->unit_count ? "unit" : "role");
    return failed;
}

static const struct reader *choose(const char *path, const uint8_t *head, size_t size)
{
    for (size_t i = 0; readers[i]; i++) {
        if (readers[i]->recognise(path, head, size))
            return readers[i];
    }
    return NULL;
}

static int choose_by_head(const char *path, const struct file_space *files,
                          const struct reader **out, struct err *err)
{
    struct mapped mapped;
    int failed = files->map(files, path, &mapped, err);
    if (failed)
        return failed;
    size_t head = mapped.size < HEAD_SIZE ? mapped.size : HEAD_SIZE;
    bool empty = mapped.size == 0;
    *out = empty ? NULL : choose(path, mapped.data, head);
    files->unmap(files, &mapped);
    if (empty)
        return err_set(err, ERR_FORMAT, "%s: empty file; nothing was recorded into it", path);
    if (!*out)
        return err_set(err, ERR_FORMAT,
                       "%s: not a recording this program knows; `incisura help formats` lists them",
                       path);
    return ERR_OK;
}

int recording_open(const char *path, const struct reader_options *options, struct recording **out,
                   struct err *err)
{
    static const struct reader_options nothing = {0};
    options = options ? options : &nothing;
    const struct file_space *files = options->files ? options->files : &disk_files;
    const struct reader *reader;
    struct recording *made = NULL;
    int failed = choose_by_head(path, files, &reader, err);
    if (!failed)
        failed = reader->open(path, options, files, &made, err);
    if (failed)
        return failed;
    failed = finish(made, options, err);
    if (failed)
        recording_close(made);
    else
        *out = made;
    return failed;
}

void recording_close(struct recording *recording)
{
    if (!recording)
        return;
    recording->ops->close(recording);
    arena_free(&recording->arena);
    free((void *)recording->notes);
    free(recording);
}

const struct recording_info *recording_info(const struct recording *recording)
{
    return &recording->info;
}

int recording_find(const struct recording *recording, const char *label)
{
    int loose = -1;
    for (size_t i = 0; i < recording->info.channel_count; i++) {
        if (strcmp(recording->info.channels[i].label, label) == 0)
            return (int)i;
        if (loose < 0 && ascii_equal(recording->info.channels[i].label, label))
            loose = (int)i;
    }
    return loose;
}

static int check(const struct recording *recording, size_t channel, int64_t first, int64_t count,
                 struct err *err)
{
    if (channel >= recording->info.channel_count)
        return err_set(err, ERR_USAGE, "%s: no channel number %zu", recording->info.path, channel);
    int64_t samples = recording->info.channels[channel].samples;
    if (first < 0 || count < 0 || first > samples || count > samples - first)
        return err_set(err, ERR_USAGE, "%s: samples %lld..%lld of %s do not exist; it has %lld",
                       recording->info.path, (long long)first, (long long)(first + count),
                       recording->info.channels[channel].label, (long long)samples);
    return ERR_OK;
}

int recording_read(const struct recording *recording, size_t channel, int64_t first, int64_t count,
                   float *out, struct err *err)
{
    int failed = check(recording, channel, first, count, err);
    if (failed || count == 0)
        return failed;
    return recording->ops->read(recording, channel, first, count, out, err);
}

static int scan_minmax(const struct recording *recording, size_t channel, int64_t first,
                       int64_t count, float *low, float *high, struct err *err)
{
    float least = INFINITY, greatest = -INFINITY, piece[SCAN_STEP];
    while (count > 0) {
        int64_t step = count < SCAN_STEP ? count : SCAN_STEP;
        int failed = recording->ops->read(recording, channel, first, step, piece, err);
        if (failed)
            return failed;
        widen_extremes(piece, step, &least, &greatest);
        first += step;
        count -= step;
    }
    bool none = least > greatest;
    *low = none ? NAN : least;
    *high = none ? NAN : greatest;
    return ERR_OK;
}

int recording_minmax(const struct recording *recording, size_t channel, int64_t first,
                     int64_t count, float *low, float *high, struct err *err)
{
    int failed = check(recording, channel, first, count, err);
    if (failed)
        return failed;
    if (count == 0) {
        *low = *high = NAN;
        return ERR_OK;
    }
    if (recording->ops->minmax)
        return recording->ops->minmax(recording, channel, first, count, low, high, err);
    return scan_minmax(recording, channel, first, count, low, high, err);
}
