/*
 * test_source_name.c - texts that name a source of live bytes, and those that cannot be meant.
 * Opens nothing.
 */
#include <criterion/criterion.h>

#include <stdio.h>
#include <string.h>

#include "recording/source_impl.h"

/* The prefix alone, and with each of the rests, which bars part. */
static void expect_refused(const char *prefix, const char *rests)
{
    for (bool alone = true; alone || *rests; alone = false) {
        struct source *source = NULL;
        struct err err = {0};
        char text[80];
        int length = alone ? 0 : (int)strcspn(rests, "|");
        (void)snprintf(text, sizeof text, "%s%.*s", prefix, length, rests);
        rests += alone ? 0 : length + (rests[length] == '|');
        cr_expect_eq(source_new(text, &source, &err), ERR_USAGE, "'%s'", text);
        cr_expect_null(source);
        cr_expect_not_null(strstr(err.text, text), "%s", err.text);
        cr_expect_null(strchr(err.text, '\n'));
    }
}

Test(source_name, texts_that_cannot_be_meant_are_refused)
{
    expect_refused("", "");
    expect_refused("fifo:", "");
    expect_refused("serial:", "/dev/ttyS0|/dev/ttyS0@|@9600|/dev/ttyS0@9601|/dev/ttyS0@-9600|"
                              "/dev/ttyS0@fast|/dev/ttyS0@9600000000000");
    expect_refused("tcp:", "monitor|monitor:|:4000|monitor:0|monitor:65536|monitor:-1|monitor:http|"
                           "::1:4000|[::1]|[::1|[::1:4000|[]:4000|monitor:4000 |monitor:+4000");
}

Test(source_name, texts_that_can_be_meant)
{
    static const struct {
        const char *text;
        enum source_kind kind;
        const char *name;
    } good[] = {{"fifo:/tmp/a b", SOURCE_FIFO, "/tmp/a b"},
                {"serial:/dev/ttyUSB0@115200", SOURCE_SERIAL, "/dev/ttyUSB0"},
                {"serial:/dev/a@b@9600", SOURCE_SERIAL, "/dev/a@b"},
                {"tcp:monitor:4000", SOURCE_TCP, "monitor"},
                {"tcp:[::1]:65535", SOURCE_TCP, "::1"},
                {"tcp:10.0.0.7:1", SOURCE_TCP, "10.0.0.7"},
                {"-", SOURCE_STDIN, "-"},
                {"growing.csv", SOURCE_FILE, "growing.csv"},
                {"./fifo:a", SOURCE_FILE, "./fifo:a"}};
    for (size_t i = 0; i < sizeof good / sizeof *good; i++) {
        struct source *source = NULL;
        struct err err = {0};
        cr_assert_eq(source_new(good[i].text, &source, &err), 0, "%s", err.text);
        cr_expect_eq(source->kind, good[i].kind, "%s", good[i].text);
        cr_expect_str_eq(source->name, good[i].name);
        cr_expect_eq(source_returns(source), source->kind != SOURCE_STDIN);
        source_free(source);
    }
    source_free(NULL);
}
