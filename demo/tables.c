/*
 * tables.c - the marks as a person stamped them (late by a reaction time, once not at all), and
 * the truth to check every method against.
 */
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/file.h"
#include "base/ns.h"
#include "base/str.h"
#include "output.h"
#include "random.h"

static int save(const struct str *text, const char *folder, const char *name, struct err *err)
{
    struct str path = {0};
    struct outfile file;
    str_putf(&path, "%s/%s", folder, name);
    int failed = str_failed(&path) || str_failed(text) ? err_memory(err, name) : ERR_OK;
    if (!failed)
        failed = outfile_open(&file, path.text, err);
    if (!failed) {
        outfile_write(&file, text->text, text->length);
        failed = outfile_commit(&file, err);
    }
    str_free(&path);
    return failed;
}

static void put_time(struct str *table, double theatre_s)
{
    struct time_arg start = {0};
    char text[TIME_TEXT_SIZE];
    (void)iso_parse(THEATRE_START, &start);
    ns_format_day(start.ns + ns_from_s(theatre_s), 3, text);
    str_put(table, text);
}

int marks_write(const struct signals *signals, const char *folder, struct err *err)
{
    const struct scenario *scenario = &signals->scenario;
    struct random random;
    struct str table = {0};
    random_seed(&random, signals->seed, STREAM_RATER);
    str_put(&table, "code,time,until,value,unit,note\n");
    for (size_t i = 0; i < scenario->count; i++) {
        const struct happening *seen = &scenario->list[i];
        double late = random_uniform(&random, 0.3, 1.6), later = random_uniform(&random, 0.3, 1.6);
        if (!seen->stamped)
            continue;
        str_putf(&table, "%s,", seen->code);
        put_time(&table, seen->at_s + late);
        str_putc(&table, ',');
        if (seen->span_s > 0)
            put_time(&table, seen->at_s + seen->span_s + later);
        str_putf(&table, ",%s,%s,", seen->value, seen->unit);
        str_put_csv(&table, seen->note);
        str_putc(&table, '\n');
    }
    int failed = save(&table, folder, "S-204-marks.csv", err);
    str_free(&table);
    return failed;
}

static int by_time(const void *a, const void *b)
{
    const struct truth *x = a, *y = b;
    if (x->time_s != y->time_s)
        return x->time_s < y->time_s ? -1 : 1;
    return strcmp(x->event, y->event);
}

int truth_write(struct signals *signals, const char *folder, struct err *err)
{
    struct str table = {0};
    int failed = truth_add(signals, 0, "monitor-start", 0, err);
    if (!failed)
        failed = truth_add(signals, skin_start_s, "skin-start", 0, err);
    if (!failed)
        failed = truth_add(signals, head_start_s, "head-start", 0, err);
    if (failed)
        return failed;
    qsort(signals->truth, signals->truth_count, sizeof *signals->truth, by_time);
    str_put(&table, "time_s,event,value\n");
    for (size_t i = 0; i < signals->truth_count; i++) {
        const struct truth *is = &signals->truth[i];
        str_putf(&table, "%.4f,%s,%.4g\n", is->time_s, is->event, is->value);
    }
    failed = save(&table, folder, "truth.csv", err);
    str_free(&table);
    return failed;
}
