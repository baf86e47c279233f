/*
 * cmd_inspect.c - `inspect` tells what a recording holds, as text or JSON. Changes nothing.
 */
#include <inttypes.h>
#include <jansson.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>

#include "base/str.h"
#include "command/command_impl.h"

static const struct option_spec options[] = {
    OPTION_JSON, OPTION_RATE, OPTION_UNIT, OPTION_ROLE, {0},
};

enum { LIST_MOST = 20 }; /* annotations and gaps shown as text; JSON has all */

struct range {
    float low, high;
};

/* Extremes of every channel: reads the whole recording once. */
static int scan(const struct recording *recording, struct range *ranges, struct err *err)
{
    const struct recording_info *info = recording_info(recording);
    struct progress progress = {0};
    progress_total(&progress, (int64_t)info->channel_count);
    struct progress_line *line = progress_line_begin("reading", &progress);
    int failed = ERR_OK;
    for (size_t i = 0; i < info->channel_count && !failed; i++) {
        ranges[i] = (struct range){NAN, NAN};
        if (info->channels[i].samples > 0)
            failed = recording_minmax(recording, i, 0, info->channels[i].samples, &ranges[i].low,
                                      &ranges[i].high, err);
        progress_add(&progress, 1);
        if (!failed && progress_cancelled(&progress))
            failed = err_set(err, ERR_CANCELLED, "%s: stopped", info->path);
    }
    progress_line_end(line);
    return failed;
}

static json_t *number_or_null(double value)
{
    return isfinite(value) ? json_real(value) : json_null();
}

static json_t *channel_json(const struct channel *channel, struct range range)
{
    return json_pack("{s:s, s:s, s:s, s:s, s:f, s:b, s:I, s:o, s:o, s:s, s:s}", "label",
                     channel->label, "unit", channel->unit, "role", role_name(channel->role),
                     "role_why", channel->role_why, "rate_hz", channel->rate_hz, "irregular",
                     channel->times_ns != NULL, "samples", (json_int_t)channel->samples, "min",
                     number_or_null((double)range.low), "max", number_or_null((double)range.high),
                     "transducer", channel->transducer, "prefilter", channel->prefilter);
}

static json_t *gap_json(const struct gap *gap)
{
    return json_pack("{s:f, s:f}", "start_s", s_from_ns(gap->start_ns), "duration_s",
                     s_from_ns(gap->span_ns));
}

static json_t *annotation_json(const struct annotation *annotation)
{
    return json_pack("{s:f, s:f, s:s, s:s}", "onset_s", s_from_ns(annotation->onset_ns),
                     "duration_s", s_from_ns(annotation->span_ns), "text", annotation->text, "kind",
                     annotation->kind);
}

/* Appends; jansson refuses a NULL item, which is how running out of memory shows. */
static bool put(json_t *list, json_t *item)
{
    return json_array_append_new(list, item) == 0;
}

static bool fill_lists(const struct recording_info *info, const struct range *ranges,
                       json_t *channels, json_t *gaps, json_t *annotations, json_t *notes)
{
    bool good = true;
    for (size_t i = 0; i < info->channel_count && good; i++)
        good = put(channels, channel_json(&info->channels[i], ranges[i]));
    for (size_t i = 0; i < info->gap_count && good; i++)
        good = put(gaps, gap_json(&info->gaps[i]));
    for (size_t i = 0; i < info->annotation_count && good; i++)
        good = put(annotations, annotation_json(&info->annotations[i]));
    for (size_t i = 0; i < info->note_count && good; i++)
        good = put(notes, json_string(info->notes[i]));
    return good;
}

static int print_json(const struct recording_info *info, const struct range *ranges,
                      struct err *err)
{
    char start[TIME_TEXT_SIZE] = "";
    json_t *channels = json_array(), *gaps = json_array(), *annotations = json_array(),
           *notes = json_array();
    bool good = channels && gaps && annotations && notes &&
                fill_lists(info, ranges, channels, gaps, annotations, notes);
    if (info->start_civil_ns != NS_NONE)
        ns_format_civil(info->start_civil_ns, start);
    json_t *whole =
        json_pack("{s:s, s:o, s:f, s:o, s:o, s:o, s:o}", "format", info->format, "start",
                  *start ? json_string(start) : json_null(), "duration_s", s_from_ns(info->span_ns),
                  "channels", channels, "gaps", gaps, "annotations", annotations, "notes", notes);
    if (!good || !whole) {
        json_decref(whole);
        return err_memory(err, "describing a recording");
    }
    if (json_dumpf(whole, stdout, JSON_INDENT(1) | JSON_REAL_PRECISION(15)) == 0)
        (void)putchar('\n');
    json_decref(whole);
    return ERR_OK;
}

static void print_channel(const struct channel *channel, struct range range)
{
    char rate[32] = "irregular";
    if (!channel->times_ns)
        (void)snprintf(rate, sizeof rate, "%.6g Hz", channel->rate_hz);
    (void)printf("  %-18s %-8s %-12s %12" PRId64, channel->label, channel->unit, rate,
                 channel->samples);
    if (isnan(range.low))
        (void)printf("  %-24s", "no valid sample");
    else
        (void)printf("  %-10.5g to %-10.5g", (double)range.low, (double)range.high);
    (void)printf("  %-6s %s\n", role_name(channel->role), channel->role_why);
}

static void print_lists(const struct recording_info *info)
{
    if (info->gap_count > 0)
        (void)printf("gaps: %zu\n", info->gap_count);
    for (size_t i = 0; i < info->gap_count && i < LIST_MOST; i++)
        (void)printf("  %.3f s from %.3f s\n", s_from_ns(info->gaps[i].span_ns),
                     s_from_ns(info->gaps[i].start_ns));
    if (info->annotation_count > 0)
        (void)printf("annotations: %zu\n", info->annotation_count);
    for (size_t i = 0; i < info->annotation_count && i < LIST_MOST; i++) {
        const struct annotation *a = &info->annotations[i];
        (void)printf("  %.3f s  %s%s%s", s_from_ns(a->onset_ns), a->kind, *a->kind ? "  " : "",
                     a->text);
        if (a->span_ns > 0)
            (void)printf("  for %.3f s", s_from_ns(a->span_ns));
        (void)putchar('\n');
    }
    if (info->annotation_count > LIST_MOST || info->gap_count > LIST_MOST)
        (void)printf("  (the first %d; --json lists all)\n", LIST_MOST);
    for (size_t i = 0; i < info->note_count; i++)
        (void)printf("note: %s\n", info->notes[i]);
}

static void print_text(const struct recording_info *info, const struct range *ranges)
{
    char start[TIME_TEXT_SIZE] = "not stated";
    if (info->start_civil_ns != NS_NONE)
        ns_format_civil(info->start_civil_ns, start);
    (void)printf("%s: %s, start %s, %.3f s\n", path_name(info->path), info->format, start,
                 s_from_ns(info->span_ns));
    (void)printf("  %-18s %-8s %-12s %12s  %-24s  %-6s %s\n", "channel", "unit", "rate", "samples",
                 "range", "role", "because");
    for (size_t i = 0; i < info->channel_count; i++)
        print_channel(&info->channels[i], ranges[i]);
    print_lists(info);
}

static int run(const struct arguments *arguments)
{
    struct err err = {0};
    struct recording *recording = NULL;
    struct reader_options reader_options;
    struct range *ranges = NULL;
    int failed = command_reader_options(arguments, &reader_options, &err);
    if (!failed)
        failed = recording_open(arguments->args[0], &reader_options, &recording, &err);
    const struct recording_info *info = failed ? NULL : recording_info(recording);
    if (!failed) {
        ranges = calloc(info->channel_count + 1, sizeof *ranges);
        failed = ranges ? scan(recording, ranges, &err) : err_memory(&err, "the ranges");
    }
    if (!failed && argument_flag(arguments, "json"))
        failed = print_json(info, ranges, &err);
    else if (!failed)
        print_text(info, ranges);
    free(ranges);
    recording_close(recording);
    return failed ? command_fail(arguments, &err) : EXIT_DONE;
}

const struct command command_inspect = {
    .name = "inspect",
    .args = "FILE",
    .least = 1,
    .most = 1,
    .summary = "what a recording holds: channels, rates, ranges, gaps, annotations, oddities",
    .detail = "Says for each channel which role it has and why. What a maker did against the "
              "format's rules, and how it was taken, is a note. The subject's identification in "
              "the file's header is not printed.",
    .options = options,
    .run = run,
};
