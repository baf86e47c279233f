/*
 * live_layout.h - how a stream's channels are laid into BDF+ records: labels, ranges, duration.
 * For live_*.c alone.
 *
 * Records are the shortest of a set of durations in which every channel has a whole number of
 * samples. Channels of a record stream keep their own digital values, so that samples are exact,
 * with room below them for the value that means "missing". Channels of lines have no range of
 * their own: it comes from unit and role where those say one, else from the first samples.
 */
#ifndef CASE_LIVE_LAYOUT_H
#define CASE_LIVE_LAYOUT_H

#include "recording/edf_writer.h"
#include "recording/stream_parser.h"

struct live_channel {
    char *label, *unit; /* UTF-8, for people */
    enum role role;
    char file_label[17], file_unit[9], transducer[81], prefilter[81]; /* ASCII, for the file */
    double physical_min, physical_max; /* as declared; both 0: none */
    int digital_min, digital_max;
    int block_samples, record_samples;
    /* For the file. Equal: not known yet. */
    double low, high;
    int digital_low, digital_high;
};

struct live_layout {
    struct live_channel *channels;
    size_t channel_count;
    int64_t block_ns, blocks; /* as in struct stream_header */
    int64_t record_ns;
    size_t block_total, record_total; /* samples of all channels */
    int most_samples;                 /* of the fastest channel, in a record */
};

/* Copies the header; the layout is the caller's, freed with live_layout_free(). */
MUST_CHECK int live_layout_new(const struct stream_header *header, struct live_layout *out,
                               struct err *err);
MUST_CHECK int live_layout_copy(const struct live_layout *from, struct live_layout *out,
                                struct err *err);
void live_layout_free(struct live_layout *layout);

/* Labels, units, rates and declared ranges are those of the header. */
bool live_layout_matches(const struct live_layout *layout, const struct stream_header *header);

/* Every channel has a range. */
bool live_layout_ranged(const struct live_layout *layout);
/* A range for a channel without one whose first samples reach `widest` to either side of zero. */
void live_layout_set_range(struct live_channel *channel, double widest);
/* 16 times wider, again and again until `value` fits, or as wide as a header can say. */
void live_layout_widen(struct live_channel *channel, double value);

/* Whether the file can hold the value, and whether any range could. NaN fits. */
bool live_channel_holds(const struct live_channel *channel, float value);
bool live_value_fits_a_file(float value);

double live_channel_rate_hz(const struct live_layout *layout, size_t channel);

/* A BDF+D file of this layout; *channels is the caller's to free. Texts live as long as layout. */
MUST_CHECK int live_layout_spec(const struct live_layout *layout, struct edf_spec *spec,
                                struct edf_channel_spec **channels, struct err *err);

/* Printable ASCII of UTF-8 text, at most size - 1 characters. */
void live_ascii(const char *text, char *out, size_t size);

#endif
