/*
 * theatre.c - the simulated theatre: writes the recordings, marks and truth of an invented case.
 *
 *   theatre --into DIR [--minutes M] [--seed N]
 *
 * The same seed and length give the same bytes. Nothing here is a patient.
 */
#include <errno.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>

#include "base/str.h"
#include "output.h"

enum { LEAST_MINUTES = 10, MOST_MINUTES = 480 };

struct choice {
    const char *folder;
    int64_t minutes, seed;
};

static int choose(int argc, char **argv, struct choice *choice, struct err *err)
{
    for (int i = 1; i < argc; i += 2) {
        const char *value = i + 1 < argc ? argv[i + 1] : NULL;
        bool known = true;
        if (value && strcmp(argv[i], "--into") == 0)
            choice->folder = value;
        else if (value && strcmp(argv[i], "--minutes") == 0)
            known = integer_parse(value, &choice->minutes);
        else if (value && strcmp(argv[i], "--seed") == 0)
            known = integer_parse(value, &choice->seed);
        else
            known = false;
        if (!known)
            return err_set(err, ERR_USAGE,
                           "cannot use '%s %s'; write --into DIR, --minutes M, --seed N", argv[i],
                           value ? value : "");
    }
    if (!choice->folder)
        return err_set(err, ERR_USAGE, "where to? write --into DIR");
    if (choice->minutes < LEAST_MINUTES || choice->minutes > MOST_MINUTES)
        return err_set(err, ERR_USAGE, "--minutes %lld: the case lasts from %d to %d minutes",
                       (long long)choice->minutes, LEAST_MINUTES, MOST_MINUTES);
    return ERR_OK;
}

static int play(const struct choice *choice, struct err *err)
{
    struct signals signals = {0};
    if (mkdir(choice->folder, 0777) < 0 && errno != EEXIST)
        return err_errno(err, choice->folder, "make the folder");
    int failed =
        signals_make(&signals, 60.0 * (double)choice->minutes, (uint64_t)choice->seed, err);
    if (!failed)
        failed = recordings_write(&signals, choice->folder, err);
    if (!failed)
        failed = marks_write(&signals, choice->folder, err);
    if (!failed)
        failed = truth_write(&signals, choice->folder, err);
    signals_free(&signals);
    return failed;
}

int main(int argc, char **argv)
{
    struct choice choice = {NULL, 40, 204};
    struct err err = {0};
    if (choose(argc, argv, &choice, &err) || play(&choice, &err)) {
        (void)fprintf(stderr, "theatre: %s\n", err.text);
        return 2;
    }
    return 0;
}
