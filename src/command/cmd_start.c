/*
 * cmd_start.c - `start` makes a case, `attach` adds recordings to it.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "base/str.h"
#include "command/command_impl.h"

static const struct option_spec start_options[] = {
    {"subject", "CODE", false,
     "the study's code of the subject, never a name; default: the case's name"},
    {"procedure", "TEXT", false, "the operation"},
    {"rater", "ID", false, "who marks (required)"},
    {"codebook", "FILE", false, "the study's list of events (CSV); default: general anaesthesia"},
    {0},
};

/* Reads and checks a codebook file; without one the embedded default. *mapped keeps the text. */
static int read_codebook(const char *path, struct mapped *mapped, struct case_header *header,
                         struct err *err)
{
    header->codebook_text = default_codebook_text;
    header->codebook_size = default_codebook_size;
    if (path) {
        int failed = disk_files.map(&disk_files, path, mapped, err);
        if (failed)
            return failed;
        header->codebook_text = mapped->data ? (const char *)mapped->data : "";
        header->codebook_size = mapped->size;
    }
    struct codebook *codebook = NULL;
    int failed = codebook_parse(header->codebook_text, header->codebook_size,
                                path ? path : "default codebook", &codebook, err);
    codebook_free(codebook);
    return failed;
}

/* The path with ".case" at its end, and the case's name without it. */
static int case_path(const char *typed, struct str *path, struct str *name)
{
    str_put(path, typed);
    if (!path_has_suffix(typed, ".case"))
        str_put(path, ".case");
    const char *file = path_name(str_text(path));
    str_put_n(name, file, strlen(file) - 5);
    return str_failed(path) || str_failed(name);
}

static int create(const struct arguments *arguments, const char *path, const char *name,
                  struct err *err)
{
    struct mapped mapped = {0};
    const char *subject = argument(arguments, "subject");
    struct case_header header = {
        .subject = subject ? subject : name,
        .procedure = argument(arguments, "procedure"),
        .rater = argument(arguments, "rater"),
        .epoch_civil_ns = NS_NONE,
        .utc_offset_s = utc_offset_now_s(),
    };
    if (!header.rater || !*header.rater)
        return err_set(err, ERR_USAGE, "who marks? give --rater ID; every change carries it");
    int failed = read_codebook(argument(arguments, "codebook"), &mapped, &header, err);
    if (!failed)
        failed = store_create(path, &header, err);
    disk_files.unmap(&disk_files, &mapped);
    return failed;
}

static int run_start(const struct arguments *arguments)
{
    struct str path = {0}, name = {0};
    struct err err = {0};
    int failed = case_path(arguments->args[0], &path, &name) ? err_memory(&err, "a path") : 0;
    if (!failed)
        failed = create(arguments, str_text(&path), str_text(&name), &err);
    if (!failed)
        (void)fprintf(stderr, "%s is ready; next: incisura attach %s FILE...\n", str_text(&path),
                      str_text(&path));
    str_free(&path);
    str_free(&name);
    return failed ? command_fail(arguments, &err) : EXIT_DONE;
}

const struct command command_start = {
    .name = "start",
    .args = "CASE",
    .least = 1,
    .most = 1,
    .summary = "make a case: one operation of one subject, one file CASE.case",
    .detail = "The codebook is checked and copied into the case, which from then on needs no other "
              "file to be read. An existing case is never overwritten.",
    .options = start_options,
    .run = run_start,
};

static const struct option_spec attach_options[] = {
    {"start", "TIME", false, "when a file that does not say it starts: 2031-05-20T09:00:00"},
    OPTION_RATE,
    OPTION_UNIT,
    OPTION_ROLE,
    OPTION_RATER,
    {0},
};

static int attach_one(struct casefile *casefile, const char *path,
                      const struct reader_options *options, struct err *err)
{
    struct progress progress = {0};
    struct progress_line *line = progress_line_begin("reading", &progress);
    int failed = casefile_attach(casefile, path, options, &progress, err);
    progress_line_end(line);
    if (failed)
        return failed;
    size_t last = casefile_recording_count(casefile) - 1;
    const struct attached *attached = casefile_recording(casefile, last);
    const struct recording_info *info = attached->info;
    char start[TIME_TEXT_SIZE];
    ns_format_elapsed(clock_map_to_case(&attached->map, 0), 3, start);
    (void)fprintf(
        stderr, "attached %s: %s, %zu channel%s, %.1f s from %s%s\n", path_name(path), info->format,
        info->channel_count, info->channel_count == 1 ? "" : "s", s_from_ns(info->span_ns), start,
        info->start_civil_ns == NS_NONE ? " (the file says no start: put at the case's)" : "");
    for (size_t i = 0; i < info->note_count; i++)
        (void)fprintf(stderr, "  note: %s\n", info->notes[i]);
    return ERR_OK;
}

static int run_attach(const struct arguments *arguments)
{
    struct err err = {0};
    struct casefile *casefile = NULL;
    struct reader_options options;
    int failed = command_reader_options(arguments, &options, &err);
    if (!failed)
        failed = command_open(arguments, STORE_WRITE, &casefile, &err);
    for (size_t i = 1; i < arguments->count && !failed; i++)
        failed = attach_one(casefile, arguments->args[i], &options, &err);
    casefile_close(casefile);
    return failed ? command_fail(arguments, &err) : EXIT_DONE;
}

const struct command command_attach = {
    .name = "attach",
    .args = "CASE FILE...",
    .least = 2,
    .most = 1000,
    .summary = "add recordings to a case: EDF, BDF, WFDB, CSV",
    .detail = "The file stays where it is and is never written to; the case keeps its path, size "
              "and digest. A moved file is found again beside the case by its digest, a changed "
              "one is refused. The start of the first recording that states one is the case's "
              "start, from which times like +00:34:07.5 are counted.",
    .options = attach_options,
    .run = run_attach,
};
