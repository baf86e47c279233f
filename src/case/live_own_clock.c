/*
 * live_own_clock.c - telling a jump of a stream's own time from jitter and drift.
 */
#include "case/live_own_clock.h"

#include <math.h>

#include "base/ns.h"

enum { SUSPECTS_LEAST = 10, FOLLOW = 64, JITTERS = 4 };
#define PERSISTS_NS NS_PER_S
#define SURE_NS     (100 * NS_PER_MS)

static enum own_answer jumped(double off_ns, int64_t *ahead_ns)
{
    *ahead_ns = llround(off_ns);
    return off_ns < 0 || off_ns > (double)NS_PER_HOUR ? OWN_LEAP : OWN_FORWARD;
}

enum own_answer own_clock_see(struct own_clock *clock, int64_t own_ns, int64_t counted_ns,
                              int64_t period_ns, int64_t *ahead_ns)
{
    *ahead_ns = 0;
    if (own_ns == NS_NONE)
        return OWN_GOES_ON;
    if (!clock->known) {
        clock->known = true;
        clock->first_ns = own_ns;
        clock->counted_first_ns = counted_ns;
        return OWN_GOES_ON;
    }
    /* In double: a clock that was set may be off by centuries. */
    double off_ns = (double)own_ns - (double)clock->first_ns -
                    (double)(counted_ns - clock->counted_first_ns) - clock->offset_ns;
    double sure_ns = fmax(5.0 * (double)period_ns, (double)SURE_NS);
    double doubt_ns = 1.5 * (double)period_ns + JITTERS * clock->jitter_ns;
    if (fabs(off_ns) > sure_ns)
        return jumped(off_ns, ahead_ns);
    if (fabs(off_ns) <= doubt_ns) {
        clock->suspects = 0;
        clock->offset_ns += off_ns / FOLLOW;
        clock->jitter_ns += (fabs(off_ns) - clock->jitter_ns) / FOLLOW;
        return OWN_GOES_ON;
    }
    int side = off_ns < 0 ? -1 : 1;
    if (clock->suspects * side <= 0) {
        clock->suspects = 0;
        clock->suspect_since_ns = counted_ns;
    }
    clock->suspects += side;
    if (clock->suspects * side >= SUSPECTS_LEAST &&
        counted_ns - clock->suspect_since_ns >= PERSISTS_NS)
        return jumped(off_ns, ahead_ns);
    return OWN_GOES_ON;
}
