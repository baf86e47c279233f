/*
 * export.c - the export from end to end: derive, select, cut, hand to the writers, put in place.
 */
#include "export/export.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "export/folder.h"
#include "export/writer.h"
#include "window/cut.h"

enum { WRITER_MOST = 16 };

struct exporting {
    struct export_job job;
    struct arena arena;
    struct export_signal *signals;
    struct selection selection;
    struct left_out *left_out;
    size_t left_room;
    struct cutter *cutter;
    float *values;   /* shape (signal_count, samples) */
    double *scratch; /* shape (samples) */
    struct features *features;
    struct folder folder;
    struct outfile files[WRITER_MOST];
    struct progress *progress;
};

/* ---- signals ---- */

static const char *written_unit(const struct recipe *recipe, const char *unit)
{
    if (recipe->baseline_mode == BASELINE_PERCENT)
        return "%";
    return recipe->baseline_mode == BASELINE_Z ? "1" : unit;
}

static int prepare_signal(struct exporting *run, const struct recipe_signal *recipe,
                          struct export_signal *out, struct err *err)
{
    const struct derived *derived;
    struct err why = {0};
    double *parameters = arena_alloc(
        &run->arena, derivation_parameter_count(recipe->derivation) + 1, sizeof *parameters);
    if (!parameters)
        return err_memory(err, recipe->name);
    int failed = derivation_parameters(recipe->derivation, recipe->settings, recipe->setting_count,
                                       parameters, &why);
    if (!failed)
        failed =
            casefile_derive(run->job.casefile, recipe->derivation->name, recipe->channel,
                            recipe->settings, recipe->setting_count, run->progress, &derived, &why);
    if (failed)
        return err_set(err, failed, "%s:%d: signal '%s': %s", run->job.recipe->name, recipe->line,
                       recipe->name, why.text);
    *out = (struct export_signal){recipe, derived->trace, derived->trace->unit,
                                  written_unit(run->job.recipe, derived->trace->unit), parameters};
    return ERR_OK;
}

static int prepare_signals(struct exporting *run, struct err *err)
{
    const struct recipe *recipe = run->job.recipe;
    int failed = ERR_OK;
    run->signals = arena_alloc(&run->arena, recipe->signal_count, sizeof *run->signals);
    if (!run->signals)
        return err_memory(err, "the signals");
    for (size_t i = 0; i < recipe->signal_count && !failed; i++)
        failed = prepare_signal(run, &recipe->signals[i], &run->signals[i], err);
    run->job.signals = run->signals;
    return failed;
}

/* t_s is the same for every window: written once. */
static int prepare_times(struct exporting *run, struct err *err)
{
    const struct recipe *recipe = run->job.recipe;
    const char **times = arena_alloc(&run->arena, (size_t)recipe->samples, sizeof *times);
    struct str text = {0};
    bool good = times != NULL;
    for (int64_t k = 0; good && k < recipe->samples; k++) {
        str_clear(&text);
        str_put_double(&text, recipe_time_s(recipe, k));
        times[k] = arena_string(&run->arena, str_text(&text));
        good = times[k] && !str_failed(&text);
    }
    str_free(&text);
    run->job.times = times;
    return good ? ERR_OK : err_memory(err, "the windows");
}

static int prepare_windows(struct exporting *run, struct err *err)
{
    const struct recipe *recipe = run->job.recipe;
    const struct mark *marks;
    size_t count;
    void *values = NULL, *scratch = NULL;
    int failed = store_marks(casefile_store(run->job.casefile), &marks, &count, err);
    if (!failed)
        failed = select_marks(recipe, marks, count, &run->arena, &run->selection, err);
    if (!failed)
        failed = cutter_new(recipe->rate_hz, recipe->age_ns, &run->cutter, err);
    if (!failed)
        failed = array_new(&values, recipe->signal_count * (size_t)recipe->samples,
                           sizeof *run->values, err);
    run->values = values;
    if (!failed)
        failed = array_new(&scratch, (size_t)recipe->samples, sizeof *run->scratch, err);
    run->scratch = scratch;
    if (!failed)
        failed = prepare_times(run, err);
    run->features = arena_alloc(&run->arena, recipe->signal_count, sizeof *run->features);
    if (!failed && !run->features)
        failed = err_memory(err, "the windows");
    run->job.selection = &run->selection;
    return failed;
}

/* ---- windows ---- */

static int leave_out(struct exporting *run, const struct mark *mark, size_t signal, float *values,
                     double valid_share, struct err *err)
{
    int failed = array_reserve((void **)&run->left_out, &run->left_room,
                               run->job.left_out_count + 1, sizeof *run->left_out, err);
    if (failed)
        return failed;
    run->left_out[run->job.left_out_count++] =
        (struct left_out){mark->id, run->signals[signal].recipe->name, valid_share};
    run->job.left_out = run->left_out;
    for (int64_t k = 0; k < run->job.recipe->samples; k++)
        values[k] = NAN;
    return ERR_OK;
}

static double valid_share(const float *values, int64_t count)
{
    int64_t valid = 0;
    for (int64_t k = 0; k < count; k++)
        valid += !isnan(values[k]);
    return (double)valid / (double)count;
}

/* Fills one signal of one window. Too few valid samples empty it, and are kept as a reason. */
static int cut_signal(struct exporting *run, const struct mark *mark, size_t signal,
                      struct err *err)
{
    const struct recipe *recipe = run->job.recipe;
    float *values = run->values + (int64_t)signal * recipe->samples;
    int failed = cutter_cut(run->cutter, run->signals[signal].trace,
                            mark->onset_ns - recipe->before_ns, recipe->samples, values, err);
    if (failed)
        return failed;
    double share = valid_share(values, recipe->samples);
    if (share < recipe->valid_share)
        failed = leave_out(run, mark, signal, values, share, err);
    window_features(recipe, values, run->scratch, &run->features[signal]);
    run->features[signal].valid_share = share;
    return failed;
}

static int write_window(struct exporting *run, const struct mark *mark, struct err *err)
{
    int failed = ERR_OK;
    for (size_t i = 0; i < run->job.recipe->signal_count && !failed; i++)
        failed = cut_signal(run, mark, i, err);
    struct export_window window = {mark, run->values, run->features};
    for (size_t i = 0; writers[i] && !failed; i++) {
        if (writers[i]->window)
            failed = writers[i]->window(&run->job, &window, &run->files[i], err);
    }
    progress_add(run->progress, 1);
    if (!failed && progress_cancelled(run->progress))
        failed = err_set(err, ERR_CANCELLED, "stopped; nothing was written");
    return failed;
}

/* ---- files ---- */

static int open_files(struct exporting *run, struct err *err)
{
    int failed = ERR_OK;
    for (size_t i = 0; writers[i] && !failed; i++) {
        char *path = folder_file(&run->folder, writers[i]->file);
        failed = path ? outfile_open(&run->files[i], path, err) : err_memory(err, "the export");
        free(path);
        if (!failed && writers[i]->begin)
            failed = writers[i]->begin(&run->job, &run->files[i], err);
    }
    return failed;
}

static int finish_files(struct exporting *run, struct err *err)
{
    int failed = ERR_OK;
    for (size_t i = 0; writers[i] && !failed; i++) {
        if (writers[i]->end)
            failed = writers[i]->end(&run->job, &run->files[i], err);
        if (!failed)
            failed = outfile_commit(&run->files[i], err);
    }
    return failed;
}

static int write_all(struct exporting *run, const char *folder, struct err *err)
{
    int failed = folder_open(&run->folder, folder, err);
    if (!failed)
        failed = open_files(run, err);
    progress_total(run->progress, (int64_t)run->selection.count);
    for (size_t i = 0; i < run->selection.count && !failed; i++)
        failed = write_window(run, run->selection.marks[i], err);
    if (!failed)
        failed = finish_files(run, err);
    if (!failed)
        return folder_commit(&run->folder, err);
    for (size_t i = 0; writers[i]; i++)
        outfile_discard(&run->files[i]);
    folder_discard(&run->folder);
    return failed;
}

static void run_free(struct exporting *run)
{
    cutter_free(run->cutter);
    free(run->values);
    free(run->scratch);
    free(run->left_out);
    arena_free(&run->arena);
    free(run);
}

int export_run(struct casefile *casefile, const struct recipe *recipe, const char *folder,
               struct progress *progress, struct export_summary *out, struct err *err)
{
    if (!casefile_store(casefile))
        return err_set(err, ERR_USAGE, "%s: a recording, not a case; it holds no marks",
                       casefile_path(casefile));
    struct exporting *run = calloc(1, sizeof *run);
    if (!run)
        return err_memory(err, "an export");
    run->job = (struct export_job){.casefile = casefile, .recipe = recipe};
    run->progress = progress;
    int failed = prepare_signals(run, err);
    if (!failed)
        failed = prepare_windows(run, err);
    if (!failed)
        failed = write_all(run, folder, err);
    if (!failed)
        *out = (struct export_summary){run->selection.count, run->selection.excluded_count,
                                       run->job.left_out_count};
    run_free(run);
    return failed;
}
