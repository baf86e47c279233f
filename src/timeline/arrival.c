/*
 * arrival.c - the lower convex hull of arrivals, and the line under it. Knows no samples and reads
 * no clock.
 */
#include "timeline/arrival.h"

#include <math.h>
#include <stddef.h>

#define DRIFT_AFTER_NS (30 * NS_PER_S)
/* A device that is said to send at another rate than it does, or a recording that is played
 * faster, is off by more than any crystal; what runs backwards or stands still is no clock. */
#define SLOPE_LEAST -0.9999
#define SLOPE_MOST  9.0
/* A drift that no crystal has, but a device whose rate is not what it says, is plain much sooner.
 */
#define CLEAR_AFTER_NS (5 * NS_PER_S)
#define CLEAR_DRIFT    1e-3
enum { CLEAR_POINTS = 8, CLEAR_TIMES = 8 };
/* A slope over this span is an exact piece to within 1e-12. */
#define PIECE_SPAN_NS (1000 * NS_PER_S)

/* ---- the hull ---- */

/* > 0 when b lies under the line from a to c. */
static __int128 depth(const struct arrival_point *a, const struct arrival_point *b,
                      const struct arrival_point *c)
{
    return (__int128)(b->own_ns - a->own_ns) * (c->late_ns - a->late_ns) -
           (__int128)(b->late_ns - a->late_ns) * (c->own_ns - a->own_ns);
}

static double slope_of(const struct arrival_point *a, const struct arrival_point *b)
{
    return (double)(b->late_ns - a->late_ns) / (double)(b->own_ns - a->own_ns);
}

/* Where the edges before and after edge [at, at + 1] meet, under it; *deep is how far under. */
static struct arrival_point meeting(const struct arrival_point *hull, int at, double *deep)
{
    const struct arrival_point *from = &hull[at], *to = &hull[at + 1];
    double before = slope_of(&hull[at - 1], from), after = slope_of(to, &hull[at + 2]);
    double width = (double)(to->own_ns - from->own_ns);
    double bend = after - before;
    double along = bend > 0 ? (after * width - (double)(to->late_ns - from->late_ns)) / bend : 0;
    along = fmin(fmax(along, 0), width);
    *deep = along * (slope_of(from, to) - before);
    return (struct arrival_point){from->own_ns + (int64_t)along,
                                  from->late_ns + (int64_t)floor(along * before)};
}

/* One point fewer: the edge whose neighbours meet least far below it gives way to their meeting.
 * The hull only sinks, so that no line under it can rise above an arrival. */
static void thin(struct arrival_fit *fit)
{
    struct arrival_point best = {0};
    double least = HUGE_VAL;
    int at = 1;
    for (int i = 1; i + 2 < fit->count; i++) {
        double deep;
        struct arrival_point point = meeting(fit->hull, i, &deep);
        if (deep < least) {
            least = deep;
            best = point;
            at = i;
        }
    }
    fit->hull[at] = best;
    for (int i = at + 1; i + 1 < fit->count; i++)
        fit->hull[i] = fit->hull[i + 1];
    fit->count--;
}

static void hull_add(struct arrival_fit *fit, struct arrival_point point)
{
    if (fit->count > 0 && fit->hull[fit->count - 1].own_ns == point.own_ns) {
        if (fit->hull[fit->count - 1].late_ns <= point.late_ns)
            return;
        fit->count--;
    }
    while (fit->count >= 2 &&
           depth(&fit->hull[fit->count - 2], &fit->hull[fit->count - 1], &point) <= 0)
        fit->count--;
    fit->hull[fit->count++] = point;
    if (fit->count > ARRIVAL_HULL_MOST)
        thin(fit);
}

/* ---- the line ---- */

/* The edge over the mean of all points: the line through it has the least sum of distances. */
static double hull_slope(const struct arrival_fit *fit)
{
    double mean_ns = fit->own_sum_s * 1e9 / (double)fit->points;
    int at = 0;
    while (at + 2 < fit->count && (double)(fit->hull[at + 1].own_ns - fit->first_own_ns) <= mean_ns)
        at++;
    if (fit->count < 2)
        return 0;
    return slope_of(&fit->hull[at], &fit->hull[at + 1]);
}

static double above(const struct arrival_fit *fit, const struct arrival_point *point, double slope)
{
    return (double)point->late_ns - slope * (double)(point->own_ns - fit->first_own_ns);
}

/* late_ns at first_own_ns of the highest line of this slope under all points. */
static double intercept(const struct arrival_fit *fit, double slope)
{
    double least = HUGE_VAL;
    for (int i = 0; i < fit->count; i++)
        least = fmin(least, above(fit, &fit->hull[i], slope));
    return least;
}

/* ---- least arrivals ---- */

static const struct arrival_point *
lower(const struct arrival_fit *fit, const struct arrival_point *a, const struct arrival_point *b)
{
    if (a->own_ns == NS_NONE || b->own_ns == NS_NONE)
        return a->own_ns == NS_NONE ? b : a;
    return above(fit, b, fit->slope) < above(fit, a, fit->slope) ? b : a;
}

static void double_bins(struct arrival_fit *fit)
{
    fit->slope = arrival_tells_drift(fit) ? hull_slope(fit) : 0;
    for (int i = 0; i < ARRIVAL_BINS / 2; i++)
        fit->least[i] = *lower(fit, &fit->least[2 * i], &fit->least[2 * i + 1]);
    for (int i = ARRIVAL_BINS / 2; i < ARRIVAL_BINS; i++)
        fit->least[i].own_ns = NS_NONE;
    fit->bin_ns *= 2;
}

static void bin_add(struct arrival_fit *fit, struct arrival_point point)
{
    while ((point.own_ns - fit->first_own_ns) / fit->bin_ns >= ARRIVAL_BINS)
        double_bins(fit);
    struct arrival_point *least = &fit->least[(point.own_ns - fit->first_own_ns) / fit->bin_ns];
    *least = *lower(fit, least, &point);
}

/* How far the bins' least arrivals lie above the line on average, over the root of how many there
 * are: as the standard error of a mean. Where the line was not free to follow them, the mean. */
static double envelope_error_ns(const struct arrival_fit *fit, double slope, bool held)
{
    double base = intercept(fit, slope), sum = 0;
    int bins = 0;
    for (int i = 0; i < ARRIVAL_BINS; i++) {
        if (fit->least[i].own_ns == NS_NONE)
            continue;
        sum += above(fit, &fit->least[i], slope) - base;
        bins++;
    }
    if (bins == 0)
        return 0;
    return held ? sum / bins : sum / bins / sqrt(bins);
}

/* ---- the fit ---- */

void arrival_add(struct arrival_fit *fit, int64_t own_ns, int64_t boottime_ns)
{
    if (fit->points == 0) {
        fit->first_own_ns = own_ns;
        fit->first_boottime_ns = boottime_ns;
        fit->bin_ns = NS_PER_S;
        for (int i = 0; i < ARRIVAL_BINS; i++)
            fit->least[i].own_ns = NS_NONE;
    }
    struct arrival_point point = {own_ns, (boottime_ns - fit->first_boottime_ns) -
                                              (own_ns - fit->first_own_ns)};
    fit->points++;
    fit->last_own_ns = own_ns;
    fit->own_sum_s += s_from_ns(own_ns - fit->first_own_ns);
    hull_add(fit, point);
    bin_add(fit, point);
}

bool arrival_tells_drift(const struct arrival_fit *fit)
{
    double length_ns = (double)(fit->last_own_ns - fit->first_own_ns);
    if (fit->points < 2 || length_ns < (double)CLEAR_AFTER_NS)
        return false;
    double slope = hull_slope(fit);
    /* Off by the error at one end and by as much the other way at the other end. */
    double bend_ns = 2 * envelope_error_ns(fit, slope, false);
    if (length_ns >= (double)DRIFT_AFTER_NS)
        return bend_ns < ARRIVAL_CRYSTAL_PPM * 1e-6 * length_ns ||
               CLEAR_TIMES * bend_ns < fabs(slope) * length_ns;
    return fit->points >= CLEAR_POINTS && fabs(slope) >= CLEAR_DRIFT &&
           CLEAR_TIMES * bend_ns < fabs(slope) * length_ns;
}

bool arrival_piece(const struct arrival_fit *fit, int64_t case_minus_boottime_ns,
                   struct clock_piece *out)
{
    if (fit->points == 0)
        return false;
    bool drifts = arrival_tells_drift(fit);
    double slope = drifts ? hull_slope(fit) : 0;
    bool held = slope < SLOPE_LEAST || slope > SLOPE_MOST;
    if (held)
        slope = slope < SLOPE_LEAST ? SLOPE_LEAST : SLOPE_MOST;
    double length_ns = (double)(fit->last_own_ns - fit->first_own_ns);
    double unknown_ns = drifts ? 0 : ARRIVAL_CRYSTAL_PPM * 1e-6 * length_ns;
    double spread_ns = envelope_error_ns(fit, slope, held);
    double error_ns = hypot(hypot(spread_ns, unknown_ns), (double)ARRIVAL_LEAST_NS);
    *out = (struct clock_piece){
        .at_ns = fit->first_own_ns,
        .span_ns = PIECE_SPAN_NS,
        .case_ns =
            fit->first_boottime_ns + (int64_t)floor(intercept(fit, slope)) + case_minus_boottime_ns,
        .case_span_ns = PIECE_SPAN_NS + llround(slope * (double)PIECE_SPAN_NS),
        .error_ns = llround(error_ns),
    };
    return true;
}

void arrival_shift(struct arrival_fit *fit, int64_t by_ns)
{
    fit->first_own_ns -= by_ns;
    fit->last_own_ns -= by_ns;
    for (int i = 0; i < fit->count; i++)
        fit->hull[i].own_ns -= by_ns;
    for (int i = 0; i < ARRIVAL_BINS; i++) {
        if (fit->least[i].own_ns != NS_NONE)
            fit->least[i].own_ns -= by_ns;
    }
}
