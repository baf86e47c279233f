/*
 * test_arrival.c - the clock fit against simulated streams whose true clock is known: crystals off
 * by up to 200 ppm, packets held and delivered in bursts, exponential delays.
 */
#include <criterion/criterion.h>

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "timeline/arrival.h"

struct link {
    double drift_ppm;      /* positive: the device's clock is slow */
    int64_t packet_ns;     /* one packet each, of own time */
    int64_t hold_ns;       /* packets are held up to this long and come all at once */
    double delay_s;        /* mean of the exponential part */
    int64_t least_ns;      /* and what every packet takes */
    int64_t stall_from_ns; /* own time; nothing comes for stall_ns, then all of it in one burst */
    int64_t stall_ns;
    int64_t length_ns;
};

enum { START_BOOTTIME = 987654321 };

static uint64_t seed;

/* In (0, 1]. */
static double uniform(void)
{
    seed = seed * 6364136223846793005u + 1442695040888963407u;
    return (double)((seed >> 11) + 1) / 9007199254740992.0;
}

static int64_t true_ns(const struct link *link, int64_t own_ns)
{
    return START_BOOTTIME + own_ns + llround((double)own_ns * link->drift_ppm * 1e-6);
}

/* What the reader of a link sees: a point each delivery, in order. */
static void simulate(const struct link *link, struct arrival_fit *fit)
{
    int64_t last_ns = 0, own_ns = 0;
    memset(fit, 0, sizeof *fit);
    while (own_ns < link->length_ns) {
        /* Of what is held until now the newest sample is seen. */
        own_ns += link->packet_ns;
        if (link->hold_ns > 0)
            own_ns +=
                (int64_t)(uniform() * (double)link->hold_ns) / link->packet_ns * link->packet_ns;
        int64_t at_ns = true_ns(link, own_ns) + link->least_ns +
                        (int64_t)(-log(uniform()) * link->delay_s * 1e9);
        if (own_ns >= link->stall_from_ns && own_ns < link->stall_from_ns + link->stall_ns)
            at_ns += true_ns(link, link->stall_from_ns + link->stall_ns) - true_ns(link, own_ns);
        last_ns = at_ns > last_ns ? at_ns : last_ns; /* a stream does not overtake itself */
        arrival_add(fit, own_ns, last_ns);
    }
}

static int64_t fitted_ns(const struct clock_piece *piece, int64_t own_ns)
{
    struct clock_map map = {.pieces = piece, .piece_count = 1};
    return clock_map_to_case(&map, own_ns);
}

/* Greatest error over the stream's samples, the least delay allowed for. */
static int64_t worst_ns(const struct link *link, const struct clock_piece *piece)
{
    int64_t worst = 0;
    for (int64_t own = 0; own <= link->length_ns; own += link->length_ns / 100) {
        int64_t off = fitted_ns(piece, own) - true_ns(link, own);
        int64_t beyond = off > link->least_ns ? off - link->least_ns : off < 0 ? -off : 0;
        worst = beyond > worst ? beyond : worst;
    }
    return worst;
}

static const struct link hour = {.packet_ns = 100 * NS_PER_MS,
                                 .hold_ns = 2 * NS_PER_S,
                                 .delay_s = 0.020,
                                 .least_ns = 3 * NS_PER_MS,
                                 .length_ns = NS_PER_HOUR};

Test(arrival, nothing_yet_is_no_piece)
{
    struct arrival_fit fit = {0};
    struct clock_piece piece;
    cr_expect_not(arrival_piece(&fit, 0, &piece));
    arrival_add(&fit, 5, 1005);
    cr_assert(arrival_piece(&fit, 17, &piece));
    cr_expect(piece.at_ns == 5 && piece.case_ns == 1022 && piece.span_ns == piece.case_span_ns);
    cr_expect_geq(piece.error_ns, ARRIVAL_LEAST_NS);
}

Test(arrival, an_hour_of_bursts_within_5_ms)
{
    struct arrival_fit fit;
    for (int ppm = -200; ppm <= 200; ppm += 10) {
        struct link link = hour;
        struct clock_piece piece;
        seed = (uint64_t)(ppm + 1000);
        link.drift_ppm = ppm;
        simulate(&link, &fit);
        cr_assert(arrival_piece(&fit, 0, &piece));
        cr_assert(arrival_tells_drift(&fit));
        cr_expect_lt(worst_ns(&link, &piece), 5 * NS_PER_MS, "%d ppm: off by %.3f ms", ppm,
                     (double)worst_ns(&link, &piece) * 1e-6);
        cr_expect_float_eq(clock_piece_drift_ppm(&piece), ppm, 2);
    }
}

Test(arrival, a_stall_and_its_backlog_do_not_bend_the_fit)
{
    struct arrival_fit fit;
    for (int i = 0; i < 40; i++) {
        struct link link = hour;
        struct clock_piece piece;
        seed = (uint64_t)(i + 77);
        link.drift_ppm = 10.0 * i - 200;
        link.stall_from_ns = (int64_t)(uniform() * 3500e9);
        link.stall_ns = 60 * NS_PER_S;
        simulate(&link, &fit);
        cr_assert(arrival_piece(&fit, 0, &piece));
        cr_expect_lt(worst_ns(&link, &piece), 5 * NS_PER_MS, "stall at %.0f s: off by %.3f ms",
                     (double)link.stall_from_ns * 1e-9, (double)worst_ns(&link, &piece) * 1e-6);
    }
}

/* A standard error: two thirds of streams within it, nearly all within twice; and not so wide as
 * to say nothing. */
Test(arrival, the_stated_error_is_honest)
{
    enum { STREAMS = 600 };
    struct arrival_fit fit;
    int within = 0, within_two = 0, useful = 0;
    for (int i = 0; i < STREAMS; i++) {
        struct link link = hour;
        struct clock_piece piece;
        seed = (uint64_t)i * 7919 + 3;
        link.drift_ppm = 200 - 400 * uniform();
        link.delay_s = 0.002 + 0.05 * uniform();
        link.hold_ns = (int64_t)(2e9 * uniform());
        link.length_ns = (int64_t)(10e9 * pow(360, uniform())); /* 10 s to an hour */
        simulate(&link, &fit);
        cr_assert(arrival_piece(&fit, 0, &piece));
        int64_t worst = worst_ns(&link, &piece);
        within += worst <= piece.error_ns;
        within_two += worst <= 2 * piece.error_ns;
        useful += piece.error_ns < 4 * worst + 5 * NS_PER_MS;
    }
    cr_expect_geq(within, STREAMS * 68 / 100, "%d of %d within the stated error", within, STREAMS);
    cr_expect_geq(within_two, STREAMS * 95 / 100, "%d of %d within twice it", within_two, STREAMS);
    cr_expect_geq(useful, STREAMS * 80 / 100, "%d of %d not far too wide", useful, STREAMS);
}

Test(arrival, a_short_stream_has_slope_one)
{
    struct arrival_fit fit;
    struct link link = hour;
    struct clock_piece piece;
    link.length_ns = 20 * NS_PER_S;
    link.drift_ppm = 150;
    seed = 5;
    simulate(&link, &fit);
    cr_assert(arrival_piece(&fit, 0, &piece));
    cr_expect_eq(piece.case_span_ns, piece.span_ns);
    cr_expect_not(arrival_tells_drift(&fit));
}

/* "100 Hz" that are 99: plain after seconds, and right after an hour. */
Test(arrival, a_rate_that_is_not_what_it_says_is_followed)
{
    struct arrival_fit fit;
    for (int i = 0; i < 40; i++) {
        struct link link = hour;
        struct clock_piece piece;
        seed = (uint64_t)(i + 900);
        link.drift_ppm = i % 2 ? 10000 : -7000;
        link.hold_ns = 0;
        link.length_ns = i < 20 ? NS_PER_HOUR : 12 * NS_PER_S;
        simulate(&link, &fit);
        cr_assert(arrival_piece(&fit, 0, &piece));
        cr_assert(arrival_tells_drift(&fit));
        cr_expect_lt(worst_ns(&link, &piece), 5 * NS_PER_MS, "off by %.3f ms",
                     (double)worst_ns(&link, &piece) * 1e-6);
    }
}

/* A stream that is said to come at 250 Hz and comes at 256, or a recording played ten times faster:
 * off by more than any crystal. */
Test(arrival, a_rate_that_is_far_off_is_followed)
{
    struct arrival_fit fit;
    struct clock_piece piece;
    static const double ppm[] = {-23437.5, 24000, -900000, 5000};
    for (size_t i = 0; i < sizeof ppm / sizeof *ppm; i++) {
        struct link link = hour;
        link.drift_ppm = ppm[i];
        seed = 6;
        simulate(&link, &fit);
        cr_assert(arrival_piece(&fit, 0, &piece));
        cr_expect_float_eq(clock_piece_drift_ppm(&piece), ppm[i], 20, "%g: %g", ppm[i],
                           clock_piece_drift_ppm(&piece));
    }
}

/* Arrivals on a bowl: each is a corner of the hull, many times more than it keeps. */
Test(arrival, a_thinned_hull_stays_under_every_arrival)
{
    enum { POINTS = 20000 };
    static int64_t own[POINTS], at[POINTS];
    struct arrival_fit fit = {0};
    struct clock_piece piece;
    for (int i = 0; i < POINTS; i++) {
        double x = (double)(i - POINTS / 2) / POINTS;
        own[i] = i * NS_PER_S / 4;
        at[i] = START_BOOTTIME + own[i] + llround(4e8 * x * x + 1e8 * x * x * x);
        arrival_add(&fit, own[i], at[i]);
        cr_assert_leq(fit.count, ARRIVAL_HULL_MOST);
        if (i % 500 != 499)
            continue;
        cr_assert(arrival_piece(&fit, 0, &piece));
        for (int k = 0; k <= i; k++)
            cr_assert_leq(fitted_ns(&piece, own[k]), at[k] + 1, "point %d of %d", k, i);
        for (int k = 0; k + 1 < fit.count; k++)
            cr_assert_lt(fit.hull[k].own_ns, fit.hull[k + 1].own_ns);
    }
    cr_expect_eq(fit.count, ARRIVAL_HULL_MOST);
    /* And not far under: the bowl's bottom is nearly touched. */
    cr_expect_lt(at[POINTS / 2] - fitted_ns(&piece, own[POINTS / 2]), 5 * NS_PER_MS);
}

/* As the same stream with its own time far from zero, after days. */
Test(arrival, long_streams_do_not_lose_precision)
{
    struct arrival_fit fit = {0};
    struct clock_piece piece;
    int64_t week = 7 * NS_PER_DAY;
    for (int64_t k = 0; k < 600000; k++)
        arrival_add(&fit, week + k * NS_PER_S, week + k * NS_PER_S + k * 37 * NS_PER_US);
    cr_assert(arrival_piece(&fit, 0, &piece));
    cr_expect_float_eq(clock_piece_drift_ppm(&piece), 37, 1e-5);
    cr_expect_leq(llabs(fitted_ns(&piece, week + 599999 * NS_PER_S) -
                        (week + 599999 * NS_PER_S + 599999 * 37 * NS_PER_US)),
                  NS_PER_US);
}
