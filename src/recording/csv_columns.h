/*
 * csv_columns.h - a CSV or TSV file of signals decoded into columns of numbers. For the csv reader
 * alone: it lays them on time.
 */
#ifndef RECORDING_CSV_COLUMNS_H
#define RECORDING_CSV_COLUMNS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "base/arena.h"
#include "base/err.h"
#include "recording/recording.h"

struct csv_column {
    const char *label, *unit; /* of the header: "ECG II [mV]" */
    float *values;            /* shape (row_count); NaN where empty */
    size_t room;
    size_t numbers, texts; /* cells that held one, or neither a number nor nothing */
    size_t first_text_line;
};

enum csv_clock { CSV_SECONDS, CSV_CIVIL, CSV_DAY };

struct csv_columns {
    struct csv_column *columns; /* shape (column_count), without the time column */
    size_t column_count;
    int64_t *times_ns; /* shape (row_count); NULL without a time column */
    size_t time_room;
    enum csv_clock clock; /* what the times are: seconds, civil, or time of day (going on past
                             midnight) */
    size_t row_count;
    size_t bad_times, first_bad_time_line;  /* rows left out: no time */
    size_t backwards, first_backwards_line; /* rows left out: before the row before */
    size_t odd_width, first_odd_width_line; /* rows with fewer or more fields */
};

/* Reads all rows. `rate_hz` > 0: no time column is asked for. */
MUST_CHECK int csv_columns_read(const uint8_t *data, size_t size, const char *path, double rate_hz,
                                struct arena *arena, struct csv_columns *out, struct err *err);
void csv_columns_free(struct csv_columns *columns);

/* ---- csv_header.c ---- */

/* Does a cell say that there is no value? */
bool csv_text_missing(const char *text);
/* Is it the label of a time column? */
bool csv_time_name(const char *label);
/* "ECG II [mV]" or "ECG II (mV)" into label and unit, in `arena`; a unit may have brackets itself:
 * mm[Hg]. */
MUST_CHECK int csv_split_header(struct arena *arena, const char *text, const char **label,
                                const char **unit, struct err *err);

#endif
