/*
 * line_rate.c - the rate of rows from their times. Sees nothing else of them.
 */
#include <math.h>
#include <stdlib.h>

#include "dsp/stats.h"
#include "recording/stream_parser_impl.h"

enum { ROWS_LEAST = 5, ROWS_MOST = 64 };

/* Rates that devices have, in thousandths of a hertz; a third of a kilohertz is one. */
static const int64_t usual_mhz[] = {
    1000,    2000,    4000,    5000,    8000,    10000,   16000,   20000,   25000,
    30000,   31250,   32000,   40000,   50000,   60000,   62500,   64000,   75000,
    80000,   100000,  120000,  125000,  128000,  150000,  160000,  180000,  200000,
    240000,  250000,  256000,  300000,  333333,  360000,  400000,  480000,  500000,
    512000,  600000,  720000,  800000,  1000000, 1024000, 1200000, 2000000, 2048000,
    2400000, 2500000, 4000000, 4096000, 5000000, 8000000, 8192000, 10000000};

static int64_t common_divisor(int64_t a, int64_t b)
{
    while (b != 0) {
        int64_t rest = a % b;
        a = b;
        b = rest;
    }
    return a;
}

static struct line_rate of_mhz(int64_t mhz)
{
    /* What is written 333.333 is a third. */
    int64_t blocks = mhz, block_ns = 1000 * NS_PER_S;
    if (mhz % 1000 == 333) {
        blocks = (3 * mhz + 1) / 1000;
        block_ns = 3 * NS_PER_S;
    }
    int64_t divisor = common_divisor(blocks, block_ns / NS_PER_S);
    return (struct line_rate){block_ns / divisor, blocks / divisor};
}

struct line_rate line_rate_of_hz(double rate_hz)
{
    int64_t mhz = llround(rate_hz * 1000);
    if (mhz > 0)
        return of_mhz(mhz);
    return (struct line_rate){ns_from_s(1 / rate_hz), 1};
}

/* The usual rate within a hundredth; below one a second, a whole number of seconds. */
static struct line_rate round_rate(double period_ns)
{
    double mhz = 1e12 / period_ns, best = 0.01;
    int64_t found = 0;
    for (size_t i = 0; i < sizeof usual_mhz / sizeof *usual_mhz; i++) {
        double off = fabs(mhz / (double)usual_mhz[i] - 1);
        if (off < best) {
            best = off;
            found = usual_mhz[i];
        }
    }
    if (found)
        return of_mhz(found);
    double seconds = round(period_ns / NS_PER_S);
    if (seconds >= 1 && fabs(period_ns / (seconds * NS_PER_S) - 1) < 0.01)
        return (struct line_rate){(int64_t)seconds * NS_PER_S, 1};
    return (struct line_rate){llround(period_ns), 1};
}

/* The decimals that the times are printed with, as the unit of the last of them; a millisecond
 * where whole seconds are. */
static int64_t resolution_ns(const int64_t *times_ns, size_t count)
{
    int64_t unit = NS_PER_MS;
    for (size_t i = 0; i < count; i++) {
        while (times_ns[i] % unit != 0)
            unit /= 10;
    }
    return unit;
}

/* How many rates that devices have are such that `steps` periods last span_ns, off by as much as
 * off_ns. */
static int usual_rates(double span_ns, double steps, double off_ns)
{
    int found = 0;
    for (size_t i = 0; i < sizeof usual_mhz / sizeof *usual_mhz; i++)
        found += fabs(steps * 1e12 / (double)usual_mhz[i] - span_ns) <= off_ns;
    double seconds = round(span_ns / steps / NS_PER_S);
    return found + (seconds > 1 && fabs(steps * seconds * NS_PER_S - span_ns) <= off_ns);
}

/* The slope of the least-squares line through the rows' times, with steps far from the middle one
 * (a gap, a clock that was set) taken as the middle one: finer than the times' own resolution, and
 * not led astray by the jitter of the first and last. */
static double slope(const double *steps, size_t count, double middle)
{
    double at = 0, sum = 0, weights = 0;
    for (size_t i = 0; i <= count; i++) {
        double x = (double)i - (double)count / 2;
        sum += x * at;
        weights += x * x;
        if (i < count)
            at +=
                middle > 0 && (steps[i] > 3 * middle || steps[i] < -2 * middle) ? middle : steps[i];
    }
    return sum / weights;
}

bool line_rate_of_times(const int64_t *times_ns, size_t count, bool final, struct line_rate *out)
{
    enum { PERIOD_LEAST_NS = 1000 };
    double steps[ROWS_MOST], sorted[ROWS_MOST];
    bool even = true;
    count = count < ROWS_MOST ? count : ROWS_MOST;
    if (count < 2 || (count < ROWS_LEAST && !final))
        return false;
    size_t steps_count = count - 1;
    for (size_t i = 0; i < steps_count; i++)
        sorted[i] = steps[i] = (double)(times_ns[i + 1] - times_ns[i]);
    double middle = select_kth(sorted, steps_count, steps_count / 2);
    for (size_t i = 0; i < steps_count; i++)
        even = even && fabs(steps[i] - middle) <= 0.01 * middle;
    if (!final && count < ROWS_MOST) {
        /* Even steps may be the rounding of several rates; slow rows are not waited for. */
        double span_ns = (double)(times_ns[count - 1] - times_ns[0]);
        double off_ns = 1.01 * (double)resolution_ns(times_ns, count);
        int rates = usual_rates(span_ns, (double)steps_count, off_ns + 1e-5 * span_ns);
        if (!even || rates > 1 || (rates == 0 && span_ns < 5e9))
            return false;
    }
    /* Rows come in bursts of one time when the middle step is 0: then all steps count. */
    double period_ns = slope(steps, steps_count, middle);
    if (!(period_ns >= PERIOD_LEAST_NS))
        return false;
    *out = round_rate(period_ns);
    return true;
}
