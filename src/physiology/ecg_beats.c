/*
 * ecg_beats.c - from leads to a train: opens the leads, runs them through fusion and decision, and
 * places each beat on its R peak.
 */
#include "physiology/ecg_beats.h"

#include <stdbool.h>
#include <stdlib.h>

#include "base/array.h"
#include "physiology/ecg_fuse.h"
#include "physiology/ecg_lead.h"
#include "physiology/qrs.h"
#include "physiology/r_peak.h"

struct search {
    struct ecg_lead *leads; /* shape (lead_count) */
    struct r_peak *finders; /* shape (lead_count) */
    size_t lead_count;
    size_t ready_leads, ready_finders; /* initialised so far */
    struct ecg_fuse fuse;
    struct qrs_detector detector;
    int64_t origin_ns, end_ns;
    bool after_gap;
    struct train *out;
};

/* Opens everything; what is open on failure is closed by search_close(). */
static int search_open(struct search *search, const struct trace *const *leads, int64_t block,
                       struct err *err)
{
    void *lead_memory = NULL, *finder_memory = NULL;
    int failed = array_new_zero(&lead_memory, search->lead_count, sizeof(struct ecg_lead), err);
    if (!failed)
        failed = array_new_zero(&finder_memory, search->lead_count, sizeof(struct r_peak), err);
    search->leads = lead_memory;
    search->finders = finder_memory;
    for (size_t i = 0; !failed && i < search->lead_count; i++) {
        failed = ecg_lead_init(&search->leads[i], leads[i], search->origin_ns, block, err);
        search->ready_leads += !failed;
        if (!failed) {
            failed = r_peak_init(&search->finders[i], leads[i], err);
            search->ready_finders += !failed;
        }
    }
    if (!failed)
        failed = ecg_fuse_init(&search->fuse, search->leads, search->lead_count, err);
    qrs_init(&search->detector);
    return failed;
}

static void search_close(struct search *search)
{
    ecg_fuse_fini(&search->fuse);
    for (size_t i = 0; i < search->ready_leads; i++)
        ecg_lead_fini(&search->leads[i]);
    for (size_t i = 0; i < search->ready_finders; i++)
        r_peak_fini(&search->finders[i]);
    free(search->leads);
    free(search->finders);
}

/* Puts a QRS on its R peak and adds it to the train. The lead may have come off just there: then
 * the next one that is there tells the place. */
static int add_beat(struct search *search, const struct qrs_peak *peak, struct err *err)
{
    int64_t about_ns = search->origin_ns + (peak->tick - ECG_LAG) * ECG_TICK_NS, at_ns;
    float height;
    bool found = false;
    for (size_t i = 0; i < search->lead_count && !found; i++) {
        size_t lead = (peak->lead + i) % search->lead_count;
        int failed = r_peak_find(&search->finders[lead], about_ns, &at_ns, &height, &found, err);
        if (failed)
            return failed;
    }
    if (!found)
        return ERR_OK;
    unsigned flags = search->after_gap ? TRAIN_GAP : TRAIN_NORMAL;
    flags |= peak->doubtful ? TRAIN_DOUBTFUL : TRAIN_NORMAL;
    search->after_gap = false;
    return train_add(search->out, at_ns, height, (uint8_t)flags, err);
}

static int take_event(struct search *search, const struct fuse_event *event, struct err *err)
{
    struct qrs_detector *detector = &search->detector;
    if (event->kind == FUSE_PEAK)
        qrs_push(detector, &event->peak);
    else
        qrs_end_stretch(detector, event->peak.tick);
    for (size_t i = 0; i < detector->found_count; i++) {
        int failed = add_beat(search, &detector->found[i], err);
        if (failed)
            return failed;
    }
    if (event->kind == FUSE_STRETCH_END)
        search->after_gap = true;
    return ERR_OK;
}

static int search_run(struct search *search, struct progress *progress, struct err *err)
{
    int64_t bins = (search->end_ns - search->origin_ns) / (ECG_BIN * ECG_TICK_NS) + 2;
    progress_total(progress, bins);
    for (int64_t done = 0; done < bins;) {
        if (progress_cancelled(progress))
            return err_set(err, ERR_CANCELLED, "beats: stopped");
        int failed = ecg_fuse_advance(&search->fuse, err);
        for (size_t i = 0; !failed && i < search->fuse.event_count; i++)
            failed = take_event(search, &search->fuse.events[i], err);
        if (failed)
            return failed;
        int64_t more = 1 + ecg_fuse_skip(&search->fuse, bins - done - 1);
        progress_add(progress, more);
        done += more;
    }
    return ERR_OK;
}

int ecg_beats(const struct trace *const *leads, size_t lead_count, int64_t block,
              struct progress *progress, struct train *out, struct err *err)
{
    struct search search = {
        .lead_count = lead_count, .origin_ns = INT64_MAX, .end_ns = INT64_MIN, .out = out};
    for (size_t i = 0; i < lead_count; i++) {
        int64_t from_ns, to_ns;
        trace_extent(leads[i], &from_ns, &to_ns);
        search.origin_ns = from_ns < search.origin_ns ? from_ns : search.origin_ns;
        search.end_ns = to_ns > search.end_ns ? to_ns : search.end_ns;
    }
    int failed = search_open(&search, leads, block, err);
    if (!failed)
        failed = search_run(&search, progress, err);
    search_close(&search);
    if (failed)
        train_free(out);
    return failed;
}
