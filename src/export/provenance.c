/*
 * provenance.c - what a reviewer needs to get the same bytes a year later, as JSON.
 *
 * No names, dates or paths: recordings are told by their digest. Nothing in it depends on when or
 * where the export was made, nor on how often: the case is told by the digest of what it holds,
 * not of its history, which grows with every export.
 */
#include <jansson.h>
#include <stdlib.h>
#include <string.h>

#include "base/version.h"
#include "export/writer.h"

static json_t *real_or_null(double value)
{
    return value == value ? json_real(value) : json_null();
}

/* Digest over every field of every mark, in order, each with its length in front. */
static int marks_digest(struct store *store, char out[DIGEST_TEXT_SIZE], struct err *err)
{
    const struct mark *marks;
    size_t count;
    struct str text = {0};
    int failed = store_marks(store, &marks, &count, err);
    if (failed)
        return failed;
    for (size_t i = 0; i < count; i++) {
        const struct mark *m = &marks[i];
        const char *texts[] = {m->code,        m->unit,
                               m->route,       m->note,
                               m->rater,       mark_state_name(m->state),
                               m->stamp_clock, mark_source_name(m->source)};
        str_putf(&text, "%lld %lld %lld %lld %lld %lld %d ", (long long)m->id,
                 (long long)m->onset_ns, (long long)m->until_ns, (long long)m->error_ns,
                 (long long)m->stamp_ns, (long long)m->stamp_utc_ns, m->has_value);
        str_put_double(&text, m->has_value ? m->value : 0);
        for (size_t k = 0; k < sizeof texts / sizeof *texts; k++)
            str_putf(&text, " %zu:%s", strlen(texts[k]), texts[k]);
        str_putc(&text, '\n');
    }
    if (str_failed(&text)) {
        failed = err_memory(err, "a digest");
    } else {
        uint8_t digest[DIGEST_SIZE];
        digest_bytes(str_text(&text), text.length, digest);
        digest_text(digest, out);
    }
    str_free(&text);
    return failed;
}

/* The pieces of a fitted clock: where each begins, on both clocks, its drift and its error. */
static json_t *clock_json(const struct clock_map *map)
{
    json_t *list = json_array();
    for (size_t i = 0; list && i < map->piece_count; i++) {
        const struct clock_piece *piece = &map->pieces[i];
        json_t *item =
            json_pack("{s:f, s:f, s:f, s:f}", "recording_s", s_from_ns(piece->at_ns), "case_s",
                      s_from_ns(piece->case_ns), "drift_ppm", clock_piece_drift_ppm(piece),
                      "standard_error_s", s_from_ns(piece->error_ns));
        if (json_array_append_new(list, item) != 0) {
            json_decref(list);
            return NULL;
        }
    }
    return list;
}

static json_t *recordings_json(const struct export_job *job)
{
    json_t *list = json_array();
    for (size_t i = 0; list && i < casefile_recording_count(job->casefile); i++) {
        const struct attached *attached = casefile_recording(job->casefile, i);
        json_t *item = json_pack("{s:I, s:s, s:s, s:b, s:o, s:o}", "recording",
                                 (json_int_t)attached->id, "digest", attached->digest, "format",
                                 attached->info ? attached->info->format : "not readable",
                                 "clock_aligned", attached->map.aligned, "clock_offset_s",
                                 json_real(s_from_ns(clock_map_to_case(&attached->map, 0))),
                                 "clock", clock_json(&attached->map));
        if (json_array_append_new(list, item) != 0) {
            json_decref(list);
            return NULL;
        }
    }
    return list;
}

static json_t *signal_json(const struct export_signal *signal)
{
    const struct derivation *derivation = signal->recipe->derivation;
    json_t *parameters = json_object();
    for (size_t i = 0; parameters && i < derivation_parameter_count(derivation); i++) {
        if (json_object_set_new(parameters, derivation->parameters[i].name,
                                json_real(signal->parameters[i])) != 0) {
            json_decref(parameters);
            return NULL;
        }
    }
    return json_pack("{s:s, s:s, s:s, s:o, s:s, s:s, s:s, s:o, s:f}", "name", signal->recipe->name,
                     "derivation", derivation->name, "version", derivation->version, "channel",
                     signal->recipe->channel ? json_string(signal->recipe->channel) : json_null(),
                     "unit", signal->unit, "unit_written", signal->written, "source",
                     derivation->source, "parameters", parameters, "reach_s",
                     s_from_ns(signal->trace->reach_ns));
}

static json_t *signals_json(const struct export_job *job)
{
    json_t *list = json_array();
    for (size_t i = 0; list && i < job->recipe->signal_count; i++) {
        if (json_array_append_new(list, signal_json(&job->signals[i])) != 0) {
            json_decref(list);
            return NULL;
        }
    }
    return list;
}

static json_t *states_json(const struct recipe *recipe)
{
    json_t *list = json_array();
    for (int i = 0; list && i < 4; i++) {
        if (recipe->states[i] &&
            json_array_append_new(list, json_string(mark_state_name((enum mark_state)i))) != 0) {
            json_decref(list);
            return NULL;
        }
    }
    return list;
}

/* Codes asked for; an empty list is all of them. */
static json_t *codes_json(const struct recipe *recipe)
{
    json_t *list = json_array();
    for (size_t i = 0; list && i < recipe->code_count; i++) {
        if (json_array_append_new(list, json_string(recipe->codes[i])) != 0) {
            json_decref(list);
            return NULL;
        }
    }
    return list;
}

static json_t *not_within_json(const struct recipe *recipe)
{
    json_t *list = json_array();
    for (size_t i = 0; list && i < recipe->exclusion_count; i++) {
        const struct recipe_exclusion *rule = &recipe->exclusions[i];
        if (json_array_append_new(list, json_pack("{s:s, s:f, s:f}", "code", rule->code, "from_s",
                                                  s_from_ns(rule->from_ns), "to_s",
                                                  s_from_ns(rule->to_ns))) != 0) {
            json_decref(list);
            return NULL;
        }
    }
    return list;
}

static json_t *counts_json(const struct export_job *job)
{
    return json_pack("{s:I, s:I, s:I}", "windows", (json_int_t)job->selection->count,
                     "marks_excluded", (json_int_t)job->selection->excluded_count,
                     "signals_left_out", (json_int_t)job->left_out_count);
}

static json_t *settings_json(const struct recipe *recipe)
{
    json_t *baseline =
        recipe->has_baseline
            ? json_pack("{s:f, s:f, s:s, s:s}", "from_s", s_from_ns(recipe->baseline_from_ns),
                        "to_s", s_from_ns(recipe->baseline_to_ns), "statistic",
                        baseline_statistic_name(recipe->baseline_statistic), "mode",
                        baseline_mode_name(recipe->baseline_mode))
            : json_null();
    return json_pack("{s:o, s:o, s:o, s:b, s:f, s:f, s:f, s:f, s:I, s:f, s:f, s:o}", "codes",
                     codes_json(recipe), "not_within", not_within_json(recipe), "states",
                     states_json(recipe), "first", recipe->first, "least_distance_s",
                     s_from_ns(recipe->least_distance_ns), "before_s", s_from_ns(recipe->before_ns),
                     "after_s", s_from_ns(recipe->after_ns), "rate_hz", recipe->rate_hz, "samples",
                     (json_int_t)recipe->samples, "valid_share", recipe->valid_share, "age_s",
                     s_from_ns(recipe->age_ns), "baseline", baseline);
}

static json_t *windows_json(const struct export_job *job)
{
    json_t *list = json_array();
    for (size_t i = 0; list && i < job->selection->count; i++) {
        const struct mark *mark = job->selection->marks[i];
        json_t *item = json_pack("{s:I, s:s, s:f, s:s, s:o}", "mark", (json_int_t)mark->id, "code",
                                 mark->code, "onset_s", s_from_ns(mark->onset_ns), "state",
                                 mark_state_name(mark->state), "onset_error_s",
                                 real_or_null(mark->error_ns > 0 ? s_from_ns(mark->error_ns)
                                                                 : (double)__builtin_nan("")));
        if (json_array_append_new(list, item) != 0) {
            json_decref(list);
            return NULL;
        }
    }
    return list;
}

static json_t *exclusions_json(const struct export_job *job)
{
    json_t *list = json_array();
    bool good = list != NULL;
    for (size_t i = 0; good && i < job->selection->excluded_count; i++) {
        const struct excluded *excluded = &job->selection->excluded[i];
        good = json_array_append_new(
                   list, json_pack("{s:I, s:s, s:s}", "mark", (json_int_t)excluded->mark, "code",
                                   excluded->code, "reason", excluded->reason)) == 0;
    }
    for (size_t i = 0; good && i < job->left_out_count; i++) {
        const struct left_out *out = &job->left_out[i];
        good = json_array_append_new(list, json_pack("{s:I, s:s, s:s, s:f}", "mark",
                                                     (json_int_t)out->mark, "signal", out->signal,
                                                     "reason", "too few valid samples",
                                                     "valid_share", out->valid_share)) == 0;
    }
    if (good)
        return list;
    json_decref(list);
    return NULL;
}

static json_t *case_json(const struct export_job *job, const char *marks)
{
    const struct case_header *header = store_header(casefile_store(job->casefile));
    uint8_t digest[DIGEST_SIZE];
    char codebook[DIGEST_TEXT_SIZE];
    digest_bytes(header->codebook_text, header->codebook_size, digest);
    digest_text(digest, codebook);
    return json_pack("{s:s, s:s, s:s, s:o}", "name", casefile_name(job->casefile), "marks_digest",
                     marks, "codebook_digest", codebook, "recordings", recordings_json(job));
}

static int end(const struct export_job *job, struct outfile *out, struct err *err)
{
    char marks[DIGEST_TEXT_SIZE];
    int failed = marks_digest(casefile_store(job->casefile), marks, err);
    if (failed)
        return failed;
    json_t *whole = json_pack(
        "{s:s, s:s, s:s, s:o, s:s, s:o, s:o, s:o, s:o, s:o}", "program",
        "incisura " INCISURA_VERSION, "digests", "BLAKE2b-256", "caution",
        "research software; derived values are for statistics, not for decisions about a patient",
        "case", case_json(job, marks), "recipe", job->recipe->text, "counts", counts_json(job),
        "settings", settings_json(job->recipe), "signals", signals_json(job), "windows",
        windows_json(job), "exclusions", exclusions_json(job));
    char *text = whole ? json_dumps(whole, JSON_INDENT(1) | JSON_REAL_PRECISION(15)) : NULL;
    if (text) {
        outfile_write(out, text, strlen(text));
        outfile_write(out, "\n", 1);
    } else {
        failed = err_memory(err, "the provenance");
    }
    free(text);
    json_decref(whole);
    return failed;
}

bool provenance_is_ours(const char *path)
{
    json_t *whole = json_load_file(path, 0, NULL);
    const char *program = json_string_value(json_object_get(whole, "program"));
    bool ours = program && strncmp(program, "incisura ", strlen("incisura ")) == 0;
    json_decref(whole);
    return ours;
}

const struct writer provenance_writer = {
    .name = "provenance",
    .file = "provenance.json",
    .what = "program, recipe, digests, every parameter, what was left out and why",
    .end = end,
};
