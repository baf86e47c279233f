/*
 * play.c - pacing: which packet is due when, and saying what happens meanwhile.
 */
#include "play.h"

#include <math.h>
#include <stdio.h>
#include <time.h>

#include "base/ns.h"

struct course {
    const struct play *play;
    struct play_target *target;
    struct str header, bytes;
    int64_t began_ns; /* of CLOCK_MONOTONIC */
    double said_s;    /* theatre time up to which all was said */
};

static int64_t now_ns(void)
{
    struct timespec now = {0};
    (void)clock_gettime(CLOCK_MONOTONIC, &now);
    return now.tv_sec * NS_PER_S + now.tv_nsec;
}

static double theatre_s(int64_t packet)
{
    return (double)(packet * PACKET_MS) / 1000;
}

/* When all samples before this packet have been taken, from the count alone: nothing adds up. */
static int64_t due_ns(const struct course *course, int64_t packet)
{
    const struct play *play = course->play;
    double lasts_s = theatre_s(packet) * (1 + 1e-6 * play->drift_ppm) / play->speed;
    return course->began_ns + ns_from_s(lasts_s);
}

/* ---- what happens ---- */

static void say(double at_s, const char *what, const char *value, const char *unit)
{
    char time[TIME_TEXT_SIZE];
    ns_format_day(ns_from_s(at_s), 0, time);
    const char *space = *value ? " " : "";
    /* Nobody beside it is as good. */
    (void)printf("%s %s%s%s%s%s\n", time, what, space, value, *unit ? space : "", unit);
    (void)fflush(stdout);
}

static bool between(const struct course *course, double at_s, double until_s)
{
    return at_s >= course->said_s && at_s < until_s;
}

static void say_until(struct course *course, double until_s)
{
    const struct scenario *scenario = course->play->scenario;
    for (size_t i = 0; scenario && i < scenario->count; i++) {
        const struct happening *is = &scenario->list[i];
        if (between(course, is->at_s, until_s))
            say(is->at_s, is->code, is->value, is->unit);
        if (is->span_s > 0 && between(course, is->at_s + is->span_s, until_s))
            say(is->at_s + is->span_s, is->code, "ends", "");
    }
    if (scenario && between(course, scenario->gap_at_s, until_s))
        say(scenario->gap_at_s, "(the monitor sends nothing)", "", "");
    if (scenario && between(course, scenario->gap_at_s + scenario->gap_span_s, until_s))
        say(scenario->gap_at_s + scenario->gap_span_s, "(the monitor sends again)", "", "");
    course->said_s = until_s;
}

/* ---- packets ---- */

static bool left_out(const struct play *play, int64_t packet)
{
    const struct scenario *scenario = play->scenario;
    double t_s = theatre_s(packet);
    return scenario && t_s >= scenario->gap_at_s && t_s < scenario->gap_at_s + scenario->gap_span_s;
}

static void wait_until(struct course *course, int64_t until_ns)
{
    while (play_target_wait(course->target, until_ns))
        play_target_send(course->target, course->header.text, course->header.length);
}

/* Packets [from, to), once the last of them is over. */
static int send_packets(struct course *course, int64_t from, int64_t to, struct err *err)
{
    const struct play *play = course->play;
    for (int64_t packet = from; packet < to; packet++) {
        wait_until(course, due_ns(course, packet + 1));
        say_until(course, theatre_s(packet + 1));
        if (!left_out(play, packet))
            play->format->packet(&play->stream, packet, &course->bytes);
        if (str_failed(&course->bytes))
            return err_memory(err, "a packet");
    }
    play_target_send(course->target, course->bytes.text, course->bytes.length);
    str_clear(&course->bytes);
    return ERR_OK;
}

static int play_all(struct course *course, struct err *err)
{
    const struct play *play = course->play;
    int64_t count = (int64_t)(play->length_s * PACKETS_PER_S);
    int64_t together = (int64_t)fmax(1, round(play->burst_s * PACKETS_PER_S));
    int failed = play->format->header(&play->stream, &course->header, err);
    if (failed)
        return failed;
    (void)printf("playing to %s, from the first reader on\n", play_target_name(course->target));
    (void)fflush(stdout);
    while (!play_target_wait(course->target, now_ns() + NS_PER_S))
        ;
    play_target_send(course->target, course->header.text, course->header.length);
    course->began_ns = now_ns();
    for (int64_t from = 0; !failed && from < count; from += together)
        failed = send_packets(course, from, from + together < count ? from + together : count, err);
    return failed;
}

int play_run(const struct play *play, struct play_target *target, struct err *err)
{
    struct course course = {.play = play, .target = target};
    int failed = play_all(&course, err);
    str_free(&course.header);
    str_free(&course.bytes);
    return failed;
}
