/*
 * wfdb_annotations.c - decoding the MIT annotation format: 16-bit words of a 6-bit code and a
 * 10-bit interval, with modifiers behind the annotation they belong to.
 */
#include "recording/wfdb_annotations.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "base/str.h"
#include "recording/reader.h"

enum { SKIP = 59, NUM = 60, SUB = 61, CHN = 62, AUX = 63, NOTE = 22, CODES = 50 };

static const struct {
    const char *mnemonic, *text;
} codes[CODES] = {
    [1] = {"N", "normal beat"},
    [2] = {"L", "left bundle branch block beat"},
    [3] = {"R", "right bundle branch block beat"},
    [4] = {"a", "aberrated atrial premature beat"},
    [5] = {"V", "premature ventricular contraction"},
    [6] = {"F", "fusion of ventricular and normal beat"},
    [7] = {"J", "nodal premature beat"},
    [8] = {"A", "atrial premature beat"},
    [9] = {"S", "supraventricular premature beat"},
    [10] = {"E", "ventricular escape beat"},
    [11] = {"j", "nodal escape beat"},
    [12] = {"/", "paced beat"},
    [13] = {"Q", "unclassifiable beat"},
    [14] = {"~", "signal quality change"},
    [16] = {"|", "isolated artefact"},
    [18] = {"s", "ST change"},
    [19] = {"T", "T-wave change"},
    [20] = {"*", "systole"},
    [21] = {"D", "diastole"},
    [22] = {"\"", "comment"},
    [23] = {"=", "measurement"},
    [24] = {"p", "P-wave peak"},
    [25] = {"B", "bundle branch block beat"},
    [26] = {"^", "pacer spike"},
    [27] = {"t", "T-wave peak"},
    [28] = {"+", "rhythm change"},
    [29] = {"u", "U-wave peak"},
    [30] = {"?", "beat while learning"},
    [31] = {"!", "ventricular flutter wave"},
    [32] = {"[", "start of ventricular flutter or fibrillation"},
    [33] = {"]", "end of ventricular flutter or fibrillation"},
    [34] = {"e", "atrial escape beat"},
    [35] = {"n", "supraventricular escape beat"},
    [36] = {"@", "link to other data"},
    [37] = {"x", "blocked P wave"},
    [38] = {"f", "fusion of paced and normal beat"},
    [39] = {"(", "start of a wave"},
    [40] = {")", "end of a wave"},
    [41] = {"r", "R-on-T premature ventricular contraction"},
};

struct decoding {
    const uint8_t *bytes;
    size_t size, at;
    const char *path;
    double rate_hz;
    int64_t tick;
    struct arena *arena;
    struct annotation *made;
    size_t count, room;
    int last_code; /* of the annotation that modifiers belong to; 0 = none yet, or not kept */
    struct err *err;
};

static uint32_t word_at(const struct decoding *d, size_t at)
{
    return (uint32_t)d->bytes[at] | (uint32_t)d->bytes[at + 1] << 8;
}

static int cut_off(const struct decoding *d)
{
    return err_set(d->err, ERR_FORMAT, "%s: byte %zu: the annotation file is cut off", d->path,
                   d->at);
}

static int64_t tick_ns(const struct decoding *d)
{
    double ns = (double)d->tick * 1e9 / d->rate_hz;
    return fabs(ns) < 9e18 ? (int64_t)llround(ns) : (ns < 0 ? -1 : 1) * (INT64_MAX / 2);
}

/* 59: four bytes of a signed interval, the high 16 bits first. */
static int skip(struct decoding *d)
{
    if (d->size - d->at < 4)
        return cut_off(d);
    d->tick += (int32_t)(word_at(d, d->at) << 16 | word_at(d, d->at + 2));
    d->at += 4;
    return ERR_OK;
}

static int add(struct decoding *d, int code)
{
    bool named = code < CODES && codes[code].mnemonic;
    int failed = array_reserve((void **)&d->made, &d->room, d->count + 1, sizeof *d->made, d->err);
    if (failed)
        return failed;
    d->made[d->count++] =
        (struct annotation){tick_ns(d), 0, named ? codes[code].text : "user annotation",
                            named ? codes[code].mnemonic : "user"};
    d->last_code = code;
    return ERR_OK;
}

/* 63: text of the annotation before. The first comment may state the ticks' own rate. */
static int aux(struct decoding *d, size_t length)
{
    static const char resolution[] = "## time resolution:";
    if (d->size - d->at < length + (length & 1))
        return cut_off(d);
    char *text = recording_text(d->arena, d->bytes + d->at, length);
    d->at += length + (length & 1);
    if (!text)
        return err_memory(d->err, "an annotation");
    if (d->count == 0)
        return ERR_OK;
    double rate;
    if (d->count == 1 && d->last_code == NOTE &&
        strncmp(text, resolution, sizeof resolution - 1) == 0) {
        if (number_parse(text + sizeof resolution - 1, &rate) && rate > 0)
            d->rate_hz = rate;
        d->count = 0; /* it says how to read the file, not what happened */
        return ERR_OK;
    }
    if (*text)
        d->made[d->count - 1].text = text;
    return ERR_OK;
}

static int decode(struct decoding *d)
{
    int failed = ERR_OK;
    while (!failed && d->size - d->at >= 2) {
        uint32_t word = word_at(d, d->at);
        int code = (int)(word >> 10), interval = (int)(word & 1023);
        d->at += 2;
        if (word == 0)
            break;
        if (code == SKIP) {
            failed = skip(d);
        } else if (code == AUX) {
            failed = aux(d, (size_t)interval);
        } else if (code == NUM || code == SUB || code == CHN) {
            continue;
        } else if (code < CODES) {
            d->tick += interval;
            failed = code > 0 ? add(d, code) : ERR_OK;
        } else {
            failed = err_set(d->err, ERR_FORMAT,
                             "%s: byte %zu: no annotation has code %d; not an "
                             "annotation file, or damaged",
                             d->path, d->at - 2, code);
        }
    }
    return failed;
}

int wfdb_annotations_read(const uint8_t *bytes, size_t size, const char *path, double rate_hz,
                          struct arena *arena, struct annotation **out, size_t *count,
                          struct err *err)
{
    struct decoding d = {
        .bytes = bytes, .size = size, .path = path, .rate_hz = rate_hz, .arena = arena, .err = err};
    int failed = decode(&d);
    if (failed) {
        free(d.made);
        return failed;
    }
    *out = d.made;
    *count = d.count;
    return ERR_OK;
}
