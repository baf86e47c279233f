/*
 * cmd_import.c - `import` takes marks from a table (CSV) or from the annotations of a recording
 * (EDF+, BDF+, WFDB), all in one step that one undo takes back.
 */
#include <ctype.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "base/str.h"
#include "base/table.h"
#include "command/command_impl.h"
#include "case/mark_entry.h"

static const struct option_spec options[] = {
    {"column", "FIELD=NAME", true,
     "a column's name in the table; fields: code, time, until, value, unit, route, note"},
    {"map", "TEXT=CODE", true, "a text of the table or annotation and the code it means"},
    {"kind", "KIND", true, "WFDB: only annotations of this mnemonic (+ ~ \" N ...)"},
    {"skip-unknown", NULL, false, "leave out what has no code, and say how many"},
    OPTION_RATER,
    {0},
};

static const char *const fields[] = {"code", "time", "until", "value", "unit", "route", "note"};
enum { FIELD_COUNT = 7 };

struct import {
    const struct arguments *arguments;
    struct casefile *casefile;
    struct arena arena;
    struct mark *marks;
    size_t count, room;
    size_t unknown;
};

/* The part after "TEXT=" of the first entry of a "TEXT=VALUE" list that begins with `text`. */
static const char *mapped_to(const struct import *import, const char *option, const char *text)
{
    size_t count, length = strlen(text);
    const char *const *entries = argument_all(import->arguments, option, &count);
    for (size_t i = 0; i < count; i++) {
        if (strncmp(entries[i], text, length) == 0 && entries[i][length] == '=')
            return entries[i] + length + 1;
    }
    return NULL;
}

static int check_columns(const struct import *import, struct err *err)
{
    size_t count;
    const char *const *entries = argument_all(import->arguments, "column", &count);
    for (size_t i = 0; i < count; i++) {
        bool known = false;
        for (size_t k = 0; k < FIELD_COUNT; k++) {
            size_t length = strlen(fields[k]);
            known |= strncmp(entries[i], fields[k], length) == 0 && entries[i][length] == '=';
        }
        if (!known)
            return err_set(err, ERR_USAGE,
                           "--column '%s' is not FIELD=NAME with FIELD one of code, time, until, "
                           "value, unit, route, note",
                           entries[i]);
    }
    return ERR_OK;
}

static int push(struct import *import, const struct mark *mark, struct err *err)
{
    int failed = array_reserve((void **)&import->marks, &import->room, import->count + 1,
                               sizeof *import->marks, err);
    if (!failed)
        import->marks[import->count++] = *mark;
    return failed;
}

/* Plain numbers are seconds from the case's start: "+" makes them so for the time parser. */
static const char *import_time(struct import *import, const char *text)
{
    double seconds;
    if (!isdigit((unsigned char)text[0]) || !number_parse_comma(text, &seconds))
        return text;
    const char *made = arena_printf(&import->arena, "+%s", text);
    return made ? made : text;
}

static int import_row(struct import *import, const struct table *table, size_t row,
                      const int columns[FIELD_COUNT], struct err *err)
{
    const char *typed[FIELD_COUNT];
    for (size_t k = 0; k < FIELD_COUNT; k++)
        typed[k] = table_field(table, row, columns[k]);
    const char *mapped = mapped_to(import, "map", typed[0]);
    struct mark_text text = {
        .code = mapped ? mapped : typed[0],
        .at = import_time(import, typed[1]),
        .until = import_time(import, typed[2]),
        .value = typed[3],
        .unit = *typed[3] ? typed[4] : "",
        .route = typed[5],
        .note = typed[6],
    };
    if (argument_flag(import->arguments, "skip-unknown") &&
        !code_by_text(casefile_codebook(import->casefile), text.code)) {
        import->unknown++;
        return ERR_OK;
    }
    struct mark mark;
    int failed = mark_entry(import->casefile, &text, &import->arena, &mark, err);
    if (failed)
        return err_prefix(err, "%s:%zu", path_name(import->arguments->args[1]),
                          table_line(table, row));
    mark.source = MARK_IMPORT;
    return push(import, &mark, err);
}

static int find_columns(const struct import *import, const struct table *table,
                        int columns[FIELD_COUNT], struct err *err)
{
    for (size_t k = 0; k < FIELD_COUNT; k++) {
        const char *name = mapped_to(import, "column", fields[k]);
        columns[k] = table_column(table, name ? name : fields[k]);
        if (columns[k] < 0 && (name || k < 2))
            return err_set(err, ERR_FORMAT, "%s:1: no column '%s'; name it with --column %s=NAME",
                           path_name(import->arguments->args[1]), name ? name : fields[k],
                           fields[k]);
    }
    return ERR_OK;
}

static int import_table(struct import *import, const char *path, struct err *err)
{
    struct mapped mapped;
    struct table *table = NULL;
    int columns[FIELD_COUNT];
    int failed = disk_files.map(&disk_files, path, &mapped, err);
    if (failed)
        return failed;
    failed = table_parse(mapped.data ? (const char *)mapped.data : "", mapped.size, path_name(path),
                         &table, err);
    disk_files.unmap(&disk_files, &mapped);
    if (!failed)
        failed = find_columns(import, table, columns, err);
    for (size_t row = 0; !failed && row < table_rows(table); row++)
        failed = import_row(import, table, row, columns, err);
    /* Texts of the marks point into the table: it lives until the marks are stored. */
    if (!failed && import->count > 0)
        failed = store_mark_add_all(casefile_store(import->casefile), import->marks, import->count,
                                    "import", err);
    table_free(table);
    return failed;
}

/* Beats and waveform points are signal features, not events of the operation: taken only when
 * asked for by --kind. Mnemonics are those of the WFDB annotation codes. */
static bool wanted_kind(const struct import *import, const char *kind)
{
    size_t count;
    const char *const *kinds = argument_all(import->arguments, "kind", &count);
    for (size_t i = 0; i < count; i++) {
        if (strcmp(kinds[i], kind) == 0)
            return true;
    }
    return count == 0 && (!*kind || strchr("+~\"|=s", kind[0]) != NULL);
}

/* A code of that name or label, else the codebook's note, with the text as note. */
static const struct code *annotation_code(const struct import *import, const char *text)
{
    const struct codebook *codebook = casefile_codebook(import->casefile);
    const char *mapped = mapped_to(import, "map", text);
    const struct code *code = code_by_text(codebook, mapped ? mapped : text);
    for (size_t i = 0; i < codebook_count(codebook) && !code && !mapped; i++) {
        if (codebook_at(codebook, i)->kind == CODE_NOTE)
            code = codebook_at(codebook, i);
    }
    return code;
}

static int import_annotation(struct import *import, const struct clock_map *map,
                             const struct annotation *annotation, struct err *err)
{
    const struct code *code = annotation_code(import, annotation->text);
    if (!code && argument_flag(import->arguments, "skip-unknown")) {
        import->unknown++;
        return ERR_OK;
    }
    if (!code)
        return err_set(err, ERR_NOT_FOUND,
                       "no code for '%s'; use --map '%s=CODE', or --skip-unknown", annotation->text,
                       annotation->text);
    struct mark mark = {
        .code = code->code,
        .onset_ns = clock_map_to_case(map, annotation->onset_ns),
        .until_ns = annotation->span_ns > 0
                        ? clock_map_to_case(map, annotation->onset_ns + annotation->span_ns)
                        : NS_NONE,
        .unit = "",
        .route = "",
        .note = code->kind == CODE_NOTE ? annotation->text : "",
        .state = MARK_MARKED,
        .source = MARK_IMPORT,
        .stamp_clock = "",
        .stamp_ns = NS_NONE,
        .stamp_utc_ns = NS_NONE,
    };
    mark.state = mark_state_of(code, &mark);
    return push(import, &mark, err);
}

static int import_recording(struct import *import, struct recording *recording, struct err *err)
{
    const struct recording_info *info = recording_info(recording);
    struct clock_map map =
        clock_map_on_trust(info->start_civil_ns, casefile_epoch_civil_ns(import->casefile));
    int failed = ERR_OK;
    for (size_t i = 0; i < info->annotation_count && !failed; i++) {
        if (wanted_kind(import, info->annotations[i].kind))
            failed = import_annotation(import, &map, &info->annotations[i], err);
    }
    if (!failed && import->count > 0)
        failed = store_mark_add_all(casefile_store(import->casefile), import->marks, import->count,
                                    "import", err);
    return failed;
}

/* A table unless it is a recording that carries annotations of its own. */
static int import_file(struct import *import, const char *path, struct err *err)
{
    static const struct reader_options no_options = {0};
    if (path_has_suffix(path, ".csv") || path_has_suffix(path, ".tsv") ||
        path_has_suffix(path, ".txt"))
        return import_table(import, path, err);
    struct recording *recording = NULL;
    int failed = recording_open(path, &no_options, &recording, err);
    if (!failed)
        failed = import_recording(import, recording, err);
    recording_close(recording);
    return failed;
}

static int run(const struct arguments *arguments)
{
    struct err err = {0};
    struct casefile *casefile = NULL;
    struct import import = {.arguments = arguments};
    int failed = check_columns(&import, &err);
    if (!failed)
        failed = command_open(arguments, STORE_WRITE, &casefile, &err);
    import.casefile = casefile;
    if (!failed)
        failed = import_file(&import, arguments->args[1], &err);
    if (!failed) {
        (void)fprintf(stderr, "imported %zu mark%s from %s", import.count,
                      import.count == 1 ? "" : "s", path_name(arguments->args[1]));
        if (import.unknown > 0)
            (void)fprintf(stderr, ", left out %zu without a code", import.unknown);
        (void)fputc('\n', stderr);
    }
    casefile_close(casefile);
    arena_free(&import.arena);
    free(import.marks);
    return failed ? command_fail(arguments, &err) : EXIT_DONE;
}

const struct command command_import = {
    .name = "import",
    .args = "CASE FILE",
    .least = 2,
    .most = 2,
    .summary = "take marks from a CSV table or from a recording's annotations",
    .detail = "A table (.csv, .tsv, .txt) needs columns code and time; until, value, unit, route "
              "and note are used when there. Times are times of day, ISO 8601, +00:34:07.5 from "
              "the case's start, or plain seconds from it. All rows are taken or none: the first "
              "bad one is named with its line. Annotations of EDF+, BDF+ and WFDB recordings "
              "become the code of that name or label, or a note; beats are left out unless asked "
              "for with --kind. One undo takes the whole import back.",
    .options = options,
    .run = run,
};
