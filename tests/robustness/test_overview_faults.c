/*
 * test_overview_faults.c - an overview whose file is cut, damaged or cannot be written, whose
 * recording cannot be read, and one that is closed in the middle.
 */
#include <criterion/criterion.h>

#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <sys/stat.h>
#include <time.h>
#include <unistd.h>

#include "memory_recording.h"
#include "trace/overview.h"

static const char digest[] = "00112233445566778899aabbccddeeff00112233445566778899aabbccddeeff";

enum { SAMPLES = 70001 };
static float signal_of[SAMPLES];
static struct memory_recording of;
static char folder[] = "/tmp/incisura-overview-XXXXXX", path[64];

static void set_up(void)
{
    const float *samples = signal_of;
    const int64_t count = SAMPLES;
    for (int i = 0; i < SAMPLES; i++)
        signal_of[i] = (float)((i * 7919) % 10007);
    memory_recording_init(&of, 1, &samples, &count);
    cr_assert_not_null(mkdtemp(folder));
    (void)snprintf(path, sizeof path, "%s/a.overview", folder);
}

static void tear_down(void)
{
    (void)chmod(folder, 0700);
    (void)unlink(path);
    (void)rmdir(folder);
}

TestSuite(overview_faults, .init = set_up, .fini = tear_down);

/* Opens, waits, checks some ranges; returns the code of what went wrong meanwhile. */
static int open_and_check(const char *where, const char *what)
{
    struct overview *overview = NULL;
    struct err err = {0}, why = {0};
    cr_assert_eq(overview_open(&of.base, digest, where, 2, &overview, &err), 0, "%s", err.text);
    overview_wait(overview);
    for (int64_t first = 0; first < SAMPLES; first += 9973) {
        float low, high, want_low, want_high;
        int64_t count = SAMPLES - first;
        scan(signal_of + first, count, &want_low, &want_high);
        cr_expect_eq(overview_minmax(overview, 0, first, count, &low, &high), OVERVIEW_EXACT);
        cr_expect(low == want_low && high == want_high, "%s", what);
    }
    int64_t done, total;
    overview_progress(overview, &done, &total, &why);
    cr_expect_eq(done, total);
    if (why.code)
        cr_expect_not_null(strstr(why.text, where), "names the file: %s", why.text);
    overview_close(overview);
    return why.code;
}

static uint8_t *whole_file(size_t *size)
{
    FILE *file = fopen(path, "rb");
    cr_assert_not_null(file);
    cr_assert_eq(fseek(file, 0, SEEK_END), 0);
    *size = (size_t)ftell(file);
    rewind(file);
    uint8_t *bytes = malloc(*size);
    cr_assert_eq(fread(bytes, 1, *size, file), *size);
    (void)fclose(file);
    return bytes;
}

static void put_file(const uint8_t *bytes, size_t size)
{
    FILE *file = fopen(path, "wb");
    cr_assert_not_null(file);
    cr_assert_eq(fwrite(bytes, 1, size, file), size);
    (void)fclose(file);
}

/* Every cut and every flipped bit tried is noticed, and a good file stands there afterwards. */
Test(overview_faults, damaged_file_is_built_anew)
{
    cr_expect_eq(open_and_check(path, "first"), 0);
    size_t size;
    uint8_t *good = whole_file(&size);
    for (size_t cut = 0; cut < size; cut = cut < 200 ? cut + 13 : cut * 2) {
        char what[64];
        (void)snprintf(what, sizeof what, "cut to %zu", cut);
        put_file(good, cut);
        of.calls = 0;
        cr_expect_eq(open_and_check(path, what), 0);
        cr_expect_gt(of.calls, SAMPLES / OVERVIEW_BLOCK, "%s was not noticed", what);
    }
    for (size_t at = 0; at < size; at += at < 300 ? 5 : 97) {
        char what[64];
        (void)snprintf(what, sizeof what, "bit of byte %zu flipped", at);
        good[at] ^= (uint8_t)(1u << (at % 8));
        put_file(good, size);
        good[at] ^= (uint8_t)(1u << (at % 8));
        of.calls = 0;
        cr_expect_eq(open_and_check(path, what), 0);
        cr_expect_gt(of.calls, SAMPLES / OVERVIEW_BLOCK, "%s was not noticed", what);
        size_t now;
        uint8_t *again = whole_file(&now);
        cr_expect(now == size && memcmp(again, good, size) == 0, "%s: not mended", what);
        free(again);
    }
    free(good);
}

Test(overview_faults, file_that_cannot_be_written_leaves_memory_only)
{
    char nowhere[96];
    (void)snprintf(nowhere, sizeof nowhere, "%s/no-such-folder/a.overview", folder);
    cr_expect_eq(open_and_check(nowhere, "missing folder"), ERR_IO);
    if (geteuid() != 0) { /* root may write into a folder that says no */
        cr_assert_eq(chmod(folder, 0500), 0);
        cr_expect_eq(open_and_check(path, "read-only folder"), ERR_IO);
    }
    cr_expect_neq(access(path, F_OK), 0);
}

Test(overview_faults, unreadable_recording_stays_pending_and_says_why)
{
    of.fail_from = 65536;
    struct overview *overview = NULL;
    struct err err = {0}, why = {0};
    cr_assert_eq(overview_open(&of.base, digest, path, 1, &overview, &err), 0);
    overview_wait(overview);
    float low, high;
    int64_t done, total;
    cr_expect_eq(overview_minmax(overview, 0, 0, 65536, &low, &high), OVERVIEW_EXACT);
    cr_expect_eq(overview_minmax(overview, 0, 0, SAMPLES, &low, &high), OVERVIEW_PENDING);
    overview_progress(overview, &done, &total, &why);
    cr_expect_eq(why.code, ERR_IO);
    cr_expect_not_null(strstr(why.text, "byte 1234"));
    overview_close(overview);
    cr_expect_neq(access(path, F_OK), 0, "half an overview is not kept");
}

/* The whole would take 273 calls of 20 ms; closing waits for one call a thread, not for them all.
 * (How long that is belongs to the bench; here only that most of the work was never done.) */
Test(overview_faults, closing_stops_the_builders)
{
    of.slow_us = 20000;
    struct overview *overview = NULL;
    struct err err = {0};
    cr_assert_eq(overview_open(&of.base, digest, path, 2, &overview, &err), 0);
    overview_close(overview);
    cr_expect_lt(of.calls, 20);
    cr_expect_neq(access(path, F_OK), 0);
}
