/*
 * writer.c - the writers table, and how all tables begin a row.
 */
#include "export/writer.h"

#include <inttypes.h>

extern const struct writer dictionary_writer, features_writer, long_writer, provenance_writer,
    wide_writer;

const struct writer *const writers[] = {
    &long_writer, &wide_writer, &features_writer, &dictionary_writer, &provenance_writer, NULL,
};

int write_text(struct outfile *out, struct str *text, struct err *err)
{
    if (str_failed(text))
        return err_memory(err, "writing a table");
    outfile_write(out, str_text(text), text->length);
    str_clear(text);
    return ERR_OK;
}

void put_row_start(const struct export_job *job, const struct mark *mark, struct str *out)
{
    str_put_csv(out, casefile_name(job->casefile));
    str_putf(out, ",%" PRId64 ",", mark->id);
    str_put_csv(out, mark->code);
    str_putc(out, ',');
    str_put_seconds(out, mark->onset_ns);
}
