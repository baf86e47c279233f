/*
 * recordings.c - the three devices' files, by the program's own EDF+ and BDF+ writer.
 */
#include <math.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "base/array.h"
#include "base/ns.h"
#include "base/str.h"
#include "monitor.h"
#include "output.h"
#include "recording/edf_writer.h"

enum { CHANNEL_MAX = 8 };

struct device_channel {
    struct edf_channel_spec spec;
    const float *samples; /* from theatre time 0, spec.samples_per_record a second */
};

struct device_note {
    double at_s; /* theatre time */
    const char *text;
};

struct device {
    const char *file, *recording;
    bool bdf;
    double start_s, end_s;        /* theatre time */
    double gap_at_s, gap_until_s; /* theatre time; equal = none */
    const struct device_channel *channels;
    size_t channel_count;
    const struct device_note *notes; /* shape (note_count), in time order */
    size_t note_count;
};

static int64_t theatre_start_ns(void)
{
    struct time_arg start = {0};
    return iso_parse(THEATRE_START, &start) ? start.ns : 0;
}

/* Notes up to `until_s` go to the writer, those that fall into the gap with them. */
static int put_notes(struct edf_writer *writer, const struct device *device, size_t *next,
                     double until_s, struct err *err)
{
    int failed = ERR_OK;
    for (; !failed && *next < device->note_count && device->notes[*next].at_s < until_s; ++*next) {
        const struct device_note *note = &device->notes[*next];
        if (note->at_s >= device->start_s)
            failed = edf_writer_annotate(writer, ns_from_s(note->at_s - device->start_s), 0,
                                         note->text, err);
    }
    return failed;
}

static int put_records(struct edf_writer *writer, const struct device *device, float *record,
                       struct err *err)
{
    size_t next_note = 0;
    int failed = ERR_OK;
    for (double t = device->start_s; !failed && t + 1 <= device->end_s; t += 1) {
        if (t >= device->gap_at_s && t < device->gap_until_s)
            continue;
        float *to = record;
        for (size_t c = 0; c < device->channel_count; c++) {
            size_t count = (size_t)device->channels[c].spec.samples_per_record;
            const float *from = device->channels[c].samples + (size_t)llround(t * (double)count);
            memcpy(to, from, count * sizeof *to);
            to += count;
        }
        failed = put_notes(writer, device, &next_note, t + 1, err);
        if (!failed)
            failed = edf_writer_record(writer, ns_from_s(t - device->start_s), record, err);
    }
    return failed;
}

static int write_device(const struct device *device, const char *folder, struct err *err)
{
    struct edf_channel_spec specs[CHANNEL_MAX];
    struct str path = {0};
    struct edf_writer *writer = NULL;
    float *record = NULL;
    size_t size = 0;
    for (size_t c = 0; c < device->channel_count; c++) {
        specs[c] = device->channels[c].spec;
        size += (size_t)specs[c].samples_per_record;
    }
    struct edf_spec spec = {.bdf = device->bdf,
                            .discontinuous = device->gap_until_s > device->gap_at_s,
                            .subject = "S-204 F X X",
                            .recording = device->recording,
                            .start_civil_ns = theatre_start_ns() + ns_from_s(device->start_s),
                            .record_ns = NS_PER_S,
                            .channels = specs,
                            .channel_count = device->channel_count};
    str_putf(&path, "%s/%s", folder, device->file);
    int failed = str_failed(&path) ? err_memory(err, "a path") : ERR_OK;
    if (!failed)
        failed = array_new((void **)&record, size, sizeof *record, err);
    if (!failed) {
        (void)unlink(path.text); /* a case of an earlier run: the writer would refuse it */
        failed = edf_writer_open(path.text, &spec, &writer, err);
    }
    if (!failed)
        failed = put_records(writer, device, record, err);
    if (failed && writer)
        edf_writer_abandon(writer);
    else if (!failed)
        failed = edf_writer_close(writer, err);
    free(record);
    str_free(&path);
    return failed;
}

static int write_monitor(const struct signals *signals, const char *folder, struct err *err)
{
    const struct scenario *scenario = &signals->scenario;
    struct monitor_channel taken[MONITOR_CHANNELS];
    struct device_channel channels[MONITOR_CHANNELS];
    monitor_channels(signals, taken);
    for (size_t c = 0; c < MONITOR_CHANNELS; c++) {
        const struct monitor_channel *from = &taken[c];
        channels[c] =
            (struct device_channel){{from->label, from->unit, from->transducer, "",
                                     from->physical_min, from->physical_max, 0, 0, from->rate_hz},
                                    from->samples};
    }
    double fifth = scenario->length_s / 5;
    const struct device_note notes[] = {
        {0.10 * fifth, "Cuff inflated"},         {0.85 * fifth, "Cuff inflated"},
        {1.90 * fifth, "Cuff inflated"},         {scenario->lead_off_s + 2, "Lead off: V5"},
        {scenario->lead_on_s + 1, "Leads good"}, {3.70 * fifth, "Cuff inflated"},
        {4.60 * fifth, "Cuff inflated"},
    };
    const struct device device = {.file = "S-204-monitor.edf",
                                  .recording = "X X Simulated_monitor",
                                  .end_s = scenario->length_s,
                                  .gap_at_s = scenario->gap_at_s,
                                  .gap_until_s = scenario->gap_at_s + scenario->gap_span_s,
                                  .channels = channels,
                                  .channel_count = MONITOR_CHANNELS,
                                  .notes = notes,
                                  .note_count = sizeof notes / sizeof *notes};
    return write_device(&device, folder, err);
}

static int write_skin(const struct signals *signals, const char *folder, struct err *err)
{
    const struct device_channel channels[] = {
        {{"EDA", "uS", "two finger electrodes", "", 0, 40, 0, 0, EDA_HZ}, signals->eda}};
    const struct device_note notes[] = {{skin_start_s + 3, "Button pressed"}};
    const struct device device = {.file = "S-204-skin.edf",
                                  .recording = "X X Simulated_skin_logger",
                                  .start_s = skin_start_s,
                                  .end_s = signals->scenario.length_s - 12,
                                  .channels = channels,
                                  .channel_count = 1,
                                  .notes = notes,
                                  .note_count = 1};
    return write_device(&device, folder, err);
}

static int write_head(const struct signals *signals, const char *folder, struct err *err)
{
    const struct device_channel channels[] = {
        {{"EEG Fp1", "uV", "gel electrode", "", -2000, 2000, 0, 0, EEG_HZ}, signals->eeg_left},
        {{"EEG Fp2", "uV", "gel electrode", "", -2000, 2000, 0, 0, EEG_HZ}, signals->eeg_right}};
    const struct device_note notes[] = {{head_start_s + 5, "Impedance 3 kOhm"},
                                        {0.5 * signals->scenario.length_s, "Impedance 4 kOhm"}};
    const struct device device = {.file = "S-204-head.bdf",
                                  .recording = "X X Simulated_head_box",
                                  .bdf = true,
                                  .start_s = head_start_s,
                                  .end_s = signals->scenario.length_s - 5,
                                  .channels = channels,
                                  .channel_count = 2,
                                  .notes = notes,
                                  .note_count = 2};
    return write_device(&device, folder, err);
}

int recordings_write(const struct signals *signals, const char *folder, struct err *err)
{
    int failed = write_monitor(signals, folder, err);
    if (!failed)
        failed = write_skin(signals, folder, err);
    if (!failed)
        failed = write_head(signals, folder, err);
    return failed;
}
