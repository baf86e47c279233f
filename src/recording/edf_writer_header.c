/*
 * edf_writer_header.c - the header of a file to be written, field by field, and what its texts make
 * of each channel's scale. Writes nothing to disk.
 */
#include <stdio.h>
#include <string.h>

#include "recording/edf_writer_impl.h"

enum { NUMBER_SIZE = 8, TRANSDUCER_SIZE = 80 };

static int put_field(struct str *header, const char *text, size_t size, const char *name,
                     struct err *err)
{
    size_t length = strlen(text);
    for (size_t i = 0; i < length; i++) {
        if (text[i] < 32 || text[i] > 126)
            return err_set(err, ERR_USAGE, "EDF %s '%s' has a character that is not ASCII", name,
                           text);
    }
    if (length > size)
        return err_set(err, ERR_USAGE, "EDF %s '%s' is longer than %zu characters", name, text,
                       size);
    str_put(header, text);
    for (size_t i = length; i < size; i++)
        str_putc(header, ' ');
    return ERR_OK;
}

/* The best text of a number that fits into 8 characters. */
static void number_text(double value, char out[NUMBER_SIZE + 1])
{
    char text[40];
    for (int digits = 8; digits > 0; digits--) {
        (void)snprintf(text, sizeof text, "%.*g", digits, value);
        /* EDF readers expect plain decimals: no exponent. */
        if (strchr(text, 'e'))
            (void)snprintf(text, sizeof text, "%.*f", digits > 6 ? 6 : digits, value);
        if (strlen(text) <= NUMBER_SIZE)
            break;
    }
    (void)snprintf(out, NUMBER_SIZE + 1, "%.*s", NUMBER_SIZE, text);
}

double edf_number(double value)
{
    char text[NUMBER_SIZE + 1];
    double back;
    number_text(value, text);
    return number_parse(text, &back) ? back : 0;
}

static int put_number(struct str *header, double value, const char *name, struct err *err)
{
    char text[NUMBER_SIZE + 1];
    number_text(value, text);
    return put_field(header, text, NUMBER_SIZE, name, err);
}

static void start_texts(int64_t start_civil_ns, char date[9], char clock[9], char plus[12])
{
    static const char *const months[] = {"JAN", "FEB", "MAR", "APR", "MAY", "JUN",
                                         "JUL", "AUG", "SEP", "OCT", "NOV", "DEC"};
    struct civil c = civil_from_ns(start_civil_ns);
    (void)snprintf(date, 9, "%02u.%02u.%02u", (unsigned)c.day % 100, (unsigned)c.month % 100,
                   (unsigned)c.year % 100);
    (void)snprintf(clock, 9, "%02u.%02u.%02u", (unsigned)c.hour % 100, (unsigned)c.minute % 100,
                   (unsigned)c.second % 100);
    (void)snprintf(plus, 12, "%02u-%s-%04u", (unsigned)c.day % 100, months[(c.month - 1) % 12],
                   (unsigned)c.year % 10000);
}

static int put_fixed(struct str *header, const struct edf_spec *spec, struct err *err)
{
    char date[9], clock[9], plus[12], number[12], recording[128], seconds[NUMBER_SIZE + 1];
    size_t signals = spec->channel_count + 1;
    start_texts(spec->start_civil_ns, date, clock, plus);
    if (spec->bdf)
        str_put(header, "\xFF"
                        "BIOSEMI");
    else
        str_put(header, "0       ");
    (void)snprintf(recording, sizeof recording, "Startdate %s %.80s", plus,
                   spec->recording ? spec->recording : "X X X");
    int failed = put_field(header, spec->subject ? spec->subject : "X X X X", 80, "patient", err);
    if (!failed)
        failed = put_field(header, recording, 80, "recording", err);
    if (failed)
        return failed;
    str_put(header, date);
    str_put(header, clock);
    (void)snprintf(number, sizeof number, "%zu", 256 * (signals + 1));
    failed = put_field(header, number, 8, "header size", err);
    if (!failed)
        failed = put_field(header,
                           spec->bdf ? (spec->discontinuous ? "BDF+D" : "BDF+C")
                                     : (spec->discontinuous ? "EDF+D" : "EDF+C"),
                           44, "format", err);
    if (!failed)
        failed = put_field(header, "-1", 8, "record count", err);
    number_text(s_from_ns(spec->record_ns), seconds);
    double back;
    if (!failed && (!number_parse(seconds, &back) || ns_from_s(back) != spec->record_ns))
        failed = err_set(err, ERR_USAGE, "a record of %lld ns cannot be written in 8 characters",
                         (long long)spec->record_ns);
    if (!failed)
        failed = put_field(header, seconds, 8, "record duration", err);
    (void)snprintf(number, sizeof number, "%zu", signals);
    return failed ? failed : put_field(header, number, 4, "signal count", err);
}

struct limits {
    int low, high;
};

static struct limits digital_limits(const struct edf_spec *spec,
                                    const struct edf_channel_spec *channel)
{
    if (channel && (channel->digital_min != 0 || channel->digital_max != 0))
        return (struct limits){channel->digital_min, channel->digital_max};
    return spec->bdf ? (struct limits){-8388608, 8388607} : (struct limits){-32768, 32767};
}

/* The device's own words, cut to leave room for what every reader of the file must know. */
static void transducer_text(const struct edf_spec *spec, const struct edf_channel_spec *channel,
                            char out[TRANSDUCER_SIZE + 1])
{
    const char *own = channel ? channel->transducer : "";
    const char *words = spec->lowest_is_missing && channel ? EDF_MISSING_WORDS : "";
    const char *between = *own && *words ? "; " : "";
    int room = TRANSDUCER_SIZE - (int)(strlen(words) + strlen(between));
    (void)snprintf(out, TRANSDUCER_SIZE + 1, "%.*s%s%s", room, own, between, words);
}

/* One per-signal field for all signals, the annotation signal last. */
static int put_signals(struct str *header, const struct edf_spec *spec, size_t annotation_samples,
                       struct err *err)
{
    int failed = ERR_OK;
    for (int field = 0; field < 10 && !failed; field++) {
        for (size_t i = 0; i <= spec->channel_count && !failed; i++) {
            const struct edf_channel_spec *c = i < spec->channel_count ? &spec->channels[i] : NULL;
            struct limits limits = digital_limits(spec, c);
            char transducer[TRANSDUCER_SIZE + 1];
            switch (field) {
            case 0:
                failed = put_field(header,
                                   c           ? c->label
                                   : spec->bdf ? "BDF Annotations"
                                               : "EDF Annotations",
                                   16, "label", err);
                break;
            case 1:
                transducer_text(spec, c, transducer);
                failed = put_field(header, transducer, TRANSDUCER_SIZE, "transducer", err);
                break;
            case 2:
                failed = put_field(header, c ? c->unit : "", 8, "unit", err);
                break;
            case 3:
                failed = put_number(header, c ? c->physical_min : -1, "physical minimum", err);
                break;
            case 4:
                failed = put_number(header, c ? c->physical_max : 1, "physical maximum", err);
                break;
            case 5:
                failed = put_number(header, limits.low, "digital minimum", err);
                break;
            case 6:
                failed = put_number(header, limits.high, "digital maximum", err);
                break;
            case 7:
                failed = put_field(header, c ? c->prefilter : "", 80, "prefilter", err);
                break;
            case 8:
                failed = put_number(header, c ? c->samples_per_record : (double)annotation_samples,
                                    "samples in a record", err);
                break;
            default:
                failed = put_field(header, "", 32, "reserved", err);
            }
        }
    }
    if (!failed && str_failed(header))
        failed = err_memory(err, "a header");
    return failed;
}

int edf_writer_plan_channel(const struct edf_spec *spec, const struct edf_channel_spec *channel,
                            struct writer_channel *out, struct err *err)
{
    struct limits limits = digital_limits(spec, channel);
    char low_text[NUMBER_SIZE + 1], high_text[NUMBER_SIZE + 1];
    double low, high;
    number_text(channel->physical_min, low_text);
    number_text(channel->physical_max, high_text);
    if (!number_parse(low_text, &low) || !number_parse(high_text, &high) || low == high ||
        limits.high <= limits.low || channel->samples_per_record < 1)
        return err_set(err, ERR_USAGE, "channel '%s' has no usable range or rate", channel->label);
    double gain = (high - low) / ((double)limits.high - limits.low);
    *out = (struct writer_channel){.samples = channel->samples_per_record,
                                   .low = limits.low,
                                   .high = limits.high,
                                   .lowest_is_missing = spec->lowest_is_missing,
                                   .gain = gain,
                                   .offset = low - gain * limits.low};
    return ERR_OK;
}

int edf_writer_put_header(const struct edf_spec *spec, size_t annotation_samples,
                          struct str *header, struct err *err)
{
    int failed = put_fixed(header, spec, err);
    return failed ? failed : put_signals(header, spec, annotation_samples, err);
}
