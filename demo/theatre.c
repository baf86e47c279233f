/*
 * theatre.c - the simulated theatre: writes the recordings, marks and truth of an invented case, or
 * plays the monitor's channels as they come. The same seed and length give the same bytes. Nothing
 * here is a patient.
 */
#include <errno.h>
#include <math.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>

#include "base/array.h"
#include "base/str.h"
#include "monitor.h"
#include "output.h"
#include "play.h"

enum { LEAST_MINUTES = 10, MOST_MINUTES = 480, MOST_CHANNELS = 1024, MOST_HZ = 100000 };

static const char usage[] =
    "theatre --into DIR [--minutes M] [--seed N]\n"
    "    writes the three devices' recordings, the stamped marks and the truth of a case\n"
    "theatre --play TARGET [--speed X] [--format lines|bdf] [--minutes M] [--seed N] [--into DIR]\n"
    "        [--drift PPM] [--burst SECONDS] [--channels N --rate HZ]\n"
    "    plays the monitor of the same case, and says what happens as it does\n"
    "\n"
    "TARGET     fifo:PATH (made when missing), tcp:PORT (on 127.0.0.1; 0 takes a free one), or\n"
    "           pty:LINKPATH (a pseudo-terminal, and a symbolic link to it). One reader after\n"
    "           another; each gets the header first. The play begins with the first.\n"
    "--speed    so many times faster than real time (1)\n"
    "--format   bdf: BDF+ in records of 40 ms, each channel at its own rate (the default);\n"
    "           lines: t and all channels at 500 Hz, slower ones repeating their value\n"
    "--minutes  length of the case, 10 to 480 (40)\n"
    "--drift    the device's clock is slow by so many parts per million (0)\n"
    "--burst    packets are held and sent every so many seconds of signal (0)\n"
    "--channels, --rate   so many sines of whole frequencies instead, at a multiple of 25 Hz\n";

struct choice {
    const char *folder, *play, *format;
    int64_t minutes, seed, channels, rate_hz;
    double speed, drift_ppm, burst_s;
};

enum value_kind { TEXT, INTEGER, NUMBER };

static bool take(void *to, enum value_kind kind, const char *value)
{
    if (kind == TEXT)
        *(const char **)to = value;
    return kind == TEXT || (kind == INTEGER ? integer_parse(value, to) : number_parse(value, to));
}

static int parse(int argc, char **argv, struct choice *choice, struct err *err)
{
    const struct {
        const char *name;
        enum value_kind kind;
        void *to;
    } options[] = {
        {"--into", TEXT, &choice->folder},       {"--play", TEXT, &choice->play},
        {"--format", TEXT, &choice->format},     {"--minutes", INTEGER, &choice->minutes},
        {"--seed", INTEGER, &choice->seed},      {"--channels", INTEGER, &choice->channels},
        {"--rate", INTEGER, &choice->rate_hz},   {"--speed", NUMBER, &choice->speed},
        {"--drift", NUMBER, &choice->drift_ppm}, {"--burst", NUMBER, &choice->burst_s},
    };
    for (int i = 1; i < argc; i += 2) {
        const char *value = i + 1 < argc ? argv[i + 1] : NULL;
        bool known = false;
        for (size_t o = 0; value && !known && o < sizeof options / sizeof *options; o++)
            known = strcmp(argv[i], options[o].name) == 0 &&
                    take(options[o].to, options[o].kind, value);
        if (!known)
            return err_set(err, ERR_USAGE, "cannot use '%s %s'; `theatre --help` lists the options",
                           argv[i], value ? value : "");
    }
    return ERR_OK;
}

static int check(const struct choice *choice, struct err *err)
{
    if (!choice->folder && !choice->play)
        return err_set(err, ERR_USAGE, "where to? write --into DIR or --play TARGET");
    if (choice->minutes < LEAST_MINUTES || choice->minutes > MOST_MINUTES)
        return err_set(err, ERR_USAGE, "--minutes %lld: the case lasts from %d to %d minutes",
                       (long long)choice->minutes, LEAST_MINUTES, MOST_MINUTES);
    if (strcmp(choice->format, play_bdf.name) != 0 && strcmp(choice->format, play_lines.name) != 0)
        return err_set(err, ERR_USAGE, "--format %s: write lines or bdf", choice->format);
    if (choice->speed <= 0 || choice->burst_s < 0 || choice->drift_ppm <= -1e6)
        return err_set(err, ERR_USAGE, "--speed must be above 0, --burst not below");
    if ((choice->channels == 0) != (choice->rate_hz == 0) || choice->channels < 0 ||
        choice->channels > MOST_CHANNELS || choice->rate_hz < 0 || choice->rate_hz > MOST_HZ ||
        choice->rate_hz % PACKETS_PER_S != 0)
        return err_set(err, ERR_USAGE,
                       "--channels (up to %d) and --rate (a multiple of %d Hz) belong together",
                       MOST_CHANNELS, PACKETS_PER_S);
    return ERR_OK;
}

static int write_files(struct signals *signals, const char *folder, struct err *err)
{
    if (mkdir(folder, 0777) < 0 && errno != EEXIST)
        return err_errno(err, folder, "make the folder");
    int failed = recordings_write(signals, folder, err);
    if (!failed)
        failed = marks_write(signals, folder, err);
    return failed ? failed : truth_write(signals, folder, err);
}

static int play_channels(const struct choice *choice, struct play *play, struct err *err)
{
    struct play_target *target = NULL;
    play->format = strcmp(choice->format, play_bdf.name) == 0 ? &play_bdf : &play_lines;
    play->length_s = 60.0 * (double)choice->minutes;
    play->speed = choice->speed;
    play->drift_ppm = choice->drift_ppm;
    play->burst_s = choice->burst_s;
    int failed = play_target_open(choice->play, &target, err);
    if (!failed)
        failed = play_run(play, target, err);
    play_target_close(target);
    return failed;
}

static int play_monitor(const struct choice *choice, const struct signals *signals, struct err *err)
{
    struct monitor_channel taken[MONITOR_CHANNELS];
    struct play_channel channels[MONITOR_CHANNELS];
    struct play play = {.stream = {channels, MONITOR_CHANNELS, true},
                        .scenario = &signals->scenario};
    monitor_channels(signals, taken);
    for (size_t c = 0; c < MONITOR_CHANNELS; c++)
        channels[c] = (struct play_channel){taken[c].label,
                                            taken[c].unit,
                                            taken[c].transducer,
                                            taken[c].physical_min,
                                            taken[c].physical_max,
                                            taken[c].rate_hz,
                                            taken[c].samples,
                                            0,
                                            0};
    return play_channels(choice, &play, err);
}

/* Channel c is a sine of 1 + c % 20 Hz; all take it from one second of 1 Hz. */
static int play_sines(const struct choice *choice, struct err *err)
{
    size_t count = (size_t)choice->channels, rate = (size_t)choice->rate_hz;
    struct play_channel *channels = NULL;
    char(*labels)[32] = NULL;
    float *second = NULL;
    int failed = array_new((void **)&channels, count, sizeof *channels, err);
    if (!failed)
        failed = array_new((void **)&labels, count, sizeof *labels, err);
    if (!failed)
        failed = array_new((void **)&second, rate, sizeof *second, err);
    for (size_t k = 0; !failed && k < rate; k++)
        second[k] = (float)sin(2 * M_PI * (double)k / (double)rate);
    for (size_t c = 0; !failed && c < count; c++) {
        (void)snprintf(labels[c], sizeof labels[c], "Sine %zu", c + 1);
        channels[c] =
            (struct play_channel){labels[c], "mV", "", -2, 2, (int)rate, second, 1 + c % 20, rate};
    }
    struct play play = {.stream = {channels, count, false}};
    if (!failed)
        failed = play_channels(choice, &play, err);
    free(second);
    free(labels);
    free(channels);
    return failed;
}

static int perform(const struct choice *choice, struct err *err)
{
    struct signals signals = {0};
    if (choice->channels > 0)
        return choice->folder ? err_set(err, ERR_USAGE, "sines are played only, not written")
                              : play_sines(choice, err);
    int failed =
        signals_make(&signals, 60.0 * (double)choice->minutes, (uint64_t)choice->seed, err);
    if (!failed && choice->folder)
        failed = write_files(&signals, choice->folder, err);
    if (!failed && choice->play)
        failed = play_monitor(choice, &signals, err);
    signals_free(&signals);
    return failed;
}

int main(int argc, char **argv)
{
    struct choice choice = {.format = "bdf", .minutes = 40, .seed = 204, .speed = 1};
    struct err err = {0};
    if (argc == 2 && strcmp(argv[1], "--help") == 0)
        return fputs(usage, stdout) == EOF;
    (void)signal(SIGPIPE, SIG_IGN); /* cannot fail; a reader that went is told by write() */
    if (parse(argc, argv, &choice, &err) || check(&choice, &err) || perform(&choice, &err)) {
        (void)fprintf(stderr, "theatre: %s\n", err.text);
        return 2;
    }
    return 0;
}
