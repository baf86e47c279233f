/*
 * biosig_oracle.c - asking biosig. It gives all channels at the lowest common multiple of their
 * rates, each sample repeated.
 */
#include "biosig_oracle.h"

#include <biosig.h>

int biosig_channel(const char *path, int channel, size_t records, size_t count, double *out)
{
    HDRTYPE *header = sopen(path, "r", NULL);
    biosig_data_type *data = NULL;
    size_t rows = 0, columns = 0;
    int answer = -1;
    if (header && !biosig_check_error(header) && sread(NULL, 0, records, header) == records &&
        biosig_get_datablock(header, &data, &rows, &columns) == 0 && data &&
        columns > (size_t)channel && rows % count == 0) {
        for (size_t i = 0; i < count; i++)
            out[i] = data[(size_t)channel * rows + i * (rows / count)];
        answer = 0;
    }
    destructHDR(header);
    return answer;
}
