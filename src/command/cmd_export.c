/*
 * cmd_export.c - `export` cuts event-locked windows by a recipe.
 */
#include <stdio.h>

#include "base/str.h"
#include "command/command_impl.h"
#include "export/export.h"

static const struct option_spec options[] = {
    {"recipe", "FILE", false, "which windows (required); `incisura help recipe`"},
    {"into", "FOLDER", false, "where to (required); an earlier export there is replaced whole"},
    OPTION_RATER,
    {0},
};

static int read_recipe(const char *path, const struct codebook *codebook, struct recipe **out,
                       struct err *err)
{
    struct mapped mapped;
    int failed = disk_files.map(&disk_files, path, &mapped, err);
    if (failed)
        return failed;
    failed = recipe_parse(mapped.data ? (const char *)mapped.data : "", mapped.size, path, codebook,
                          out, err);
    disk_files.unmap(&disk_files, &mapped);
    return failed;
}

/* The case keeps that it was exported, and with which recipe; where it cannot be written, the
 * export is as good. */
static int log_export(const struct arguments *arguments, const struct recipe *recipe,
                      struct err *err)
{
    struct casefile *casefile = NULL;
    uint8_t digest[DIGEST_SIZE];
    char detail[DIGEST_TEXT_SIZE + 16], text[DIGEST_TEXT_SIZE];
    if (command_open(arguments, STORE_WRITE, &casefile, NULL))
        return ERR_OK;
    digest_bytes(recipe->text, recipe->size, digest);
    digest_text(digest, text);
    (void)snprintf(detail, sizeof detail, "recipe %s", text);
    int failed = store_log(casefile_store(casefile), "export", detail, err);
    casefile_close(casefile);
    return failed;
}

static int export_case(const struct arguments *arguments, struct casefile *casefile,
                       struct export_summary *summary, struct err *err)
{
    const char *path = argument(arguments, "recipe"), *into = argument(arguments, "into");
    struct recipe *recipe = NULL;
    struct progress progress = {0};
    if (!path || !into)
        return err_set(err, ERR_USAGE, "give --recipe FILE and --into FOLDER");
    int failed = read_recipe(path, casefile_codebook(casefile), &recipe, err);
    if (failed)
        return failed;
    struct progress_line *line = progress_line_begin("exporting", &progress);
    failed = export_run(casefile, recipe, into, &progress, summary, err);
    progress_line_end(line);
    if (!failed)
        failed = log_export(arguments, recipe, err);
    recipe_free(recipe);
    return failed;
}

static int run(const struct arguments *arguments)
{
    struct err err = {0};
    struct casefile *casefile = NULL;
    struct export_summary summary;
    int failed = command_open(arguments, STORE_READ, &casefile, &err);
    if (!failed)
        failed = export_case(arguments, casefile, &summary, &err);
    casefile_close(casefile);
    if (failed)
        return command_fail(arguments, &err);
    (void)fprintf(
        stderr,
        "%zu windows in %s; %zu marks left out, %zu signals of windows with too few valid "
        "samples (provenance.json says why)\n",
        summary.windows, argument(arguments, "into"), summary.excluded, summary.left_out);
    return summary.windows > 0 ? EXIT_DONE : EXIT_FINDINGS;
}

const struct command command_export = {
    .name = "export",
    .args = "CASE --recipe FILE --into FOLDER",
    .least = 1,
    .most = 1,
    .summary = "cut event-locked windows of raw and derived signals into tables",
    .detail = "Writes windows-long.csv, windows-wide.csv, features.csv, dictionary.csv and "
              "provenance.json, all of them or none. Cells that are not valid are empty. The same "
              "case and recipe give the same bytes. Exits 1 when no mark was selected.",
    .options = options,
    .run = run,
};
