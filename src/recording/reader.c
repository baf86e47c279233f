/*
 * reader.c - the readers table. To add a format, add its line.
 */
#include "recording/reader.h"

extern const struct reader csv_reader;
extern const struct reader edf_reader;
extern const struct reader wfdb_reader;

const struct reader *const readers[] = {&edf_reader, &wfdb_reader, &csv_reader, NULL};
