/*
 * edf_records.c - which records a file has, when each starts, and what its annotation signals say.
 * Decodes no sample.
 */
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "recording/edf_annotations.h"
#include "recording/edf_impl.h"

static int count_records(struct edf *edf, struct err *err)
{
    const struct edf_header *header = &edf->header;
    int64_t body = (int64_t)edf->mapped.size - header->bytes;
    int64_t whole = body / header->record_bytes, tail = body % header->record_bytes;
    int64_t said = header->declared_records;
    edf->records = whole;
    edf->tail = said == -1 || whole < said ? tail : 0;
    if (said == -1)
        return recording_note(&edf->base, err,
                              "the record count is -1 (the recorder crashed or still writes); %lld "
                              "whole records are there",
                              (long long)whole);
    if (whole < said)
        return recording_note(&edf->base, err,
                              "the header says %lld records, the file ends after %lld and %lld "
                              "bytes; what is there is used",
                              (long long)said, (long long)whole, (long long)tail);
    if (whole > said || tail > 0)
        return recording_note(&edf->base, err,
                              "the header says %lld records, the size makes %lld and %lld bytes; "
                              "%lld records are used",
                              (long long)said, (long long)whole, (long long)tail, (long long)whole);
    return ERR_OK;
}

/* Times are 64-bit ns: what would not fit is no recording. */
static int check_length(const struct edf *edf, struct err *err)
{
    if (edf->records == 0 || edf->header.record_ns <= INT64_MAX / 16 / edf->records)
        return ERR_OK;
    return err_set(err, ERR_FORMAT,
                   "%s: byte 244: %lld records of %.0f s make decades; the header is damaged",
                   edf->base.info.path, (long long)edf->records, s_from_ns(edf->header.record_ns));
}

static bool has_annotations(const struct edf *edf)
{
    for (size_t i = 0; i < edf->header.signal_count; i++) {
        if (edf->header.signals[i].annotations)
            return true;
    }
    return false;
}

/* Half a sample of the fastest signal: onsets are written with few decimals, and a record that
 * is off by less is not a gap. */
static int64_t slack_ns(const struct edf *edf)
{
    int64_t most = 1;
    for (size_t i = 0; i < edf->header.signal_count; i++) {
        const struct edf_signal *signal = &edf->header.signals[i];
        if (!signal->annotations && signal->samples > most)
            most = signal->samples;
    }
    return edf->header.record_ns / most / 2;
}

static int add_stretch(struct edf *edf, int64_t start_ns, int64_t record, struct err *err)
{
    int failed = array_reserve((void **)&edf->stretches, &edf->stretch_room, edf->stretch_count + 1,
                               sizeof *edf->stretches, err);
    if (!failed)
        edf->stretches[edf->stretch_count++] = (struct stretch){start_ns, record, 0};
    return failed;
}

struct oddities {
    int64_t no_onset, backwards;
    size_t malformed;
};

/* Puts record number `record`, which says that it starts at `said` (NS_NONE: does not say), after
 * the last one, or opens a new stretch at its own onset. */
static int place_record(struct edf *edf, int64_t record, int64_t said, int64_t slack,
                        struct oddities *odd, struct err *err)
{
    const struct stretch *last =
        edf->stretch_count > 0 ? &edf->stretches[edf->stretch_count - 1] : NULL;
    int64_t expected = last ? last->start_ns + last->count * edf->header.record_ns : 0;
    int64_t onset = expected;
    if (said == NS_NONE) {
        odd->no_onset++;
    } else {
        if (record == 0)
            edf->origin_ns = said;
        onset = said - edf->origin_ns;
    }
    odd->backwards += onset < expected - slack;
    int failed = ERR_OK;
    if (!last || onset > expected + slack)
        failed = add_stretch(edf, onset, record, err);
    if (!failed)
        edf->stretches[edf->stretch_count - 1].count++;
    return failed;
}

static int add_annotation(struct edf *edf, const struct tal_text *text, struct err *err)
{
    char *copy = recording_text(&edf->base.arena, text->text, text->length);
    if (!copy)
        return err_memory(err, "an annotation");
    int failed = array_reserve((void **)&edf->annotations, &edf->annotation_room,
                               edf->annotation_count + 1, sizeof *edf->annotations, err);
    if (!failed)
        edf->annotations[edf->annotation_count++] =
            (struct annotation){text->onset_ns - edf->origin_ns, text->span_ns, copy, ""};
    return failed;
}

static int take_texts(struct edf *edf, const uint8_t *bytes, size_t size, struct oddities *odd,
                      struct err *err)
{
    struct tal_reader reader;
    struct tal_text text;
    int failed = ERR_OK;
    tal_begin(&reader, bytes, size);
    while (!failed && tal_next(&reader, &text)) {
        if (text.length > 0)
            failed = add_annotation(edf, &text, err);
    }
    odd->malformed += reader.malformed;
    return failed;
}

/* All annotation signals of one record; the first of them says when the record starts. `buffer`
 * has room for the largest. */
static int read_record(struct edf *edf, int64_t record, int64_t slack, uint8_t *buffer,
                       struct oddities *odd, struct err *err)
{
    bool first = true;
    for (size_t i = 0; i < edf->header.signal_count; i++) {
        const struct edf_signal *signal = &edf->header.signals[i];
        if (!signal->annotations)
            continue;
        size_t size = (size_t)(signal->samples * edf->header.width);
        int64_t at = edf->header.bytes + record * edf->header.record_bytes + signal->at;
        int64_t said = NS_NONE;
        int failed = edf->files->copy(edf->files, &edf->mapped, (size_t)at, size, buffer, err);
        if (!failed && first) {
            if (!tal_record_onset(buffer, size, &said))
                said = NS_NONE;
            failed = place_record(edf, record, said, slack, odd, err);
        }
        if (!failed)
            failed = take_texts(edf, buffer, size, odd, err);
        if (failed)
            return failed;
        first = false;
    }
    return ERR_OK;
}

static int read_records(struct edf *edf, struct oddities *odd, struct err *err)
{
    int64_t slack = slack_ns(edf), most = 0;
    for (size_t i = 0; i < edf->header.signal_count; i++) {
        const struct edf_signal *signal = &edf->header.signals[i];
        if (signal->annotations && signal->samples > most)
            most = signal->samples;
    }
    void *buffer = NULL;
    int failed = array_new(&buffer, (size_t)(most * edf->header.width), 1, err);
    for (int64_t record = 0; record < edf->records && !failed; record++)
        failed = read_record(edf, record, slack, buffer, odd, err);
    free(buffer);
    return failed;
}

static int note_time_oddities(struct edf *edf, const struct oddities *odd, struct err *err)
{
    int failed = ERR_OK;
    bool gaps = edf->stretch_count > 1;
    if (odd->no_onset > 0)
        failed = recording_note(&edf->base, err,
                                "%lld records do not say when they start; taken to follow the one "
                                "before",
                                (long long)odd->no_onset);
    if (!failed && odd->backwards > 0)
        failed = recording_note(&edf->base, err,
                                "%lld records start before the one before has ended; laid end to "
                                "end",
                                (long long)odd->backwards);
    if (!failed && gaps && !edf->header.discontinuous)
        failed = recording_note(&edf->base, err,
                                "marked as continuous (+C), but its records leave %zu gaps; the "
                                "gaps are taken as true",
                                edf->stretch_count - 1);
    if (!failed && edf->origin_ns >= NS_PER_S)
        failed = recording_note(&edf->base, err, "record 0 starts %.3f s after the header's start",
                                s_from_ns(edf->origin_ns));
    return failed;
}

static int place_records(struct edf *edf, struct err *err)
{
    bool keeper = has_annotations(edf);
    int failed = ERR_OK;
    if (edf->header.plus && !keeper)
        failed = recording_note(&edf->base, err,
                                "a + file without an annotation signal; its records are taken as "
                                "continuous");
    if (failed || edf->records == 0 || !keeper) {
        if (!failed)
            failed = add_stretch(edf, 0, 0, err);
        if (!failed)
            edf->stretches[0].count = edf->records;
        return failed;
    }
    struct oddities odd = {0};
    failed = read_records(edf, &odd, err);
    if (!failed && odd.malformed > 0)
        failed = recording_note(&edf->base, err,
                                "%zu annotation lists break the format's grammar and are left out",
                                odd.malformed);
    return failed ? failed : note_time_oddities(edf, &odd, err);
}

/* A record of no duration only has a meaning with one sample at a stated onset. */
static int check_duration(struct edf *edf, struct err *err)
{
    bool samples = false, many = false;
    for (size_t i = 0; i < edf->header.signal_count; i++) {
        const struct edf_signal *signal = &edf->header.signals[i];
        samples |= !signal->annotations && signal->samples > 0;
        many |= !signal->annotations && signal->samples > 1;
    }
    if (edf->header.record_ns > 0 || !samples || (edf->header.discontinuous && !many))
        return ERR_OK;
    edf->header.record_ns = NS_PER_S;
    return recording_note(&edf->base, err,
                          "the duration of a record is 0, which no rate can be told from; taken as "
                          "1 s");
}

static int by_onset(const void *a, const void *b)
{
    const struct annotation *first = a, *second = b;
    if (first->onset_ns != second->onset_ns)
        return first->onset_ns < second->onset_ns ? -1 : 1;
    return strcmp(first->text, second->text);
}

static void sort_annotations(struct edf *edf)
{
    if (edf->annotation_count > 0)
        qsort(edf->annotations, edf->annotation_count, sizeof *edf->annotations, by_onset);
    edf->base.info.annotations = edf->annotations;
    edf->base.info.annotation_count = edf->annotation_count;
}

int edf_records_read(struct edf *edf, struct err *err)
{
    int failed = count_records(edf, err);
    if (!failed)
        failed = check_duration(edf, err);
    if (!failed)
        failed = check_length(edf, err);
    if (!failed)
        failed = place_records(edf, err);
    if (!failed)
        sort_annotations(edf);
    return failed;
}
