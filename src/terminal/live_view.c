/*
 * live_view.c - which traces there are, which stretch of them is shown, and to what scale.
 */
#include <stdlib.h>
#include <string.h>

#include "base/array.h"
#include "terminal/keys.h"
#include "terminal/live_impl.h"

static const int64_t narrowest_ns = 2 * NS_PER_S, widest_ns = 24 * NS_PER_HOUR;

/* ---- lanes ---- */

static struct live_lane *lane_of(struct live *live, const char *name, struct err *err)
{
    for (size_t i = 0; i < live->lane_count; i++) {
        if (strcmp(live->lanes[i].traces[0]->name, name) == 0)
            return &live->lanes[i];
    }
    void *columns = NULL;
    size_t dots = live->room.dots > 0 ? (size_t)live->room.dots : 1;
    if (array_reserve((void **)&live->lanes, &live->lane_room, live->lane_count + 1,
                      sizeof *live->lanes, err) ||
        array_new_zero(&columns, dots, sizeof(struct column), err))
        return NULL;
    live->lanes[live->lane_count] = (struct live_lane){.columns = columns};
    return &live->lanes[live->lane_count];
}

/* The trace joins the lane of its name; a new lane counts once it has a trace. */
static int add_trace(struct live *live, const struct trace *trace, struct err *err)
{
    if (trace->role == ROLE_STATUS)
        return ERR_OK;
    struct live_lane *lane = lane_of(live, trace->name, err);
    if (!lane)
        return ERR_MEMORY;
    int failed = array_reserve((void **)&lane->traces, &lane->trace_room, lane->trace_count + 1,
                               sizeof *lane->traces, err);
    if (failed) {
        if (lane->trace_count == 0)
            free(lane->columns);
        return failed;
    }
    live->lane_count += lane->trace_count == 0;
    lane->traces[lane->trace_count++] = trace;
    return ERR_OK;
}

static int add_all(struct live *live, struct trace *const *traces, size_t from, size_t count,
                   struct err *err)
{
    int failed = ERR_OK;
    for (size_t i = from; i < count && !failed; i++)
        failed = add_trace(live, traces[i], err);
    return failed;
}

/* Earlier recordings of the case show where a stream has the same channel. */
static int add_earlier(struct live *live, struct err *err)
{
    int failed = ERR_OK;
    size_t count = casefile_channel_count(live->setup.casefile);
    for (size_t i = 0; i < count && !failed; i++) {
        const struct trace *trace = casefile_channel(live->setup.casefile, i);
        for (size_t k = 0; k < live->lane_count && !failed; k++) {
            if (strcmp(live->lanes[k].traces[0]->name, trace->name) == 0) {
                failed = add_trace(live, trace, err);
                break;
            }
        }
    }
    return failed;
}

void live_find_lanes(struct live *live)
{
    struct err err = {0};
    int failed = ERR_OK;
    for (size_t i = 0; i < live->setup.stream_count && !failed; i++) {
        struct trace *const *traces;
        size_t count = 0, *seen = &live->seen_traces[i];
        failed = live_stream_refresh(live->setup.streams[i], &traces, &count, &err);
        if (failed || count == *seen)
            continue;
        bool first = live->lane_count == 0;
        failed = add_all(live, traces, *seen, count, &err);
        *seen = count;
        if (!failed && first)
            failed = add_earlier(live, &err);
    }
    if (failed)
        live_say(live, INK_ALARM, "traces cannot be shown: %s", err.text);
}

/* ---- columns and scale ---- */

static void merge(struct column *into, const struct column *from, int dots)
{
    for (int dot = 0; dot < dots; dot++) {
        if (from[dot].kind == COLUMN_DATA ||
            (from[dot].kind == COLUMN_PENDING && into[dot].kind == COLUMN_NOTHING))
            into[dot] = from[dot];
    }
}

/* The scale stands while what is shown fits it and fills a good part of it. */
static void choose_scale(struct live *live, struct live_lane *lane)
{
    double low = 0, high = 0, from, to;
    bool known = columns_range(lane->columns, view_dots(&live->view), &live->room, &low, &high);
    range_round(known, low, high, &from, &to);
    bool fits = lane->ranged && low >= lane->low && high <= lane->high &&
                high - low > 0.4 * (lane->high - lane->low);
    if (!known && lane->ranged)
        fits = true;
    if (!fits) {
        lane->low = from;
        lane->high = to;
        lane->ranged = known;
    }
}

void live_refresh_lane(struct live *live, struct live_lane *lane)
{
    static const struct display_filter no_filter = {0};
    int dots = view_dots(&live->view);
    for (int dot = 0; dot < dots; dot++)
        lane->columns[dot].kind = COLUMN_NOTHING;
    for (size_t i = 0; i < lane->trace_count; i++) {
        (void)columns_fill(live->setup.casefile, lane->traces[i], &no_filter, &live->view,
                           &live->room, live->scratch);
        merge(lane->columns, live->scratch, dots);
    }
    choose_scale(live, lane);
}

/* ---- time ---- */

/* The right edge is now, on a whole column of dots, so that columns move and do not change. */
void live_follow(struct live *live)
{
    int64_t end = live->held_until_ns == NS_NONE ? live->now_ns : live->held_until_ns;
    int64_t dot_ns = live->view.span_ns / view_dots(&live->view);
    if (dot_ns > 0)
        end -= end % dot_ns;
    live->view.from_ns = end - live->view.span_ns;
}

static void zoom(struct live *live, bool closer)
{
    static const int64_t widths_s[] = {2,   5,    10,   20,   30,   60,    120,   300,
                                       600, 1200, 1800, 3600, 7200, 14400, 28800, 86400};
    int64_t now = live->view.span_ns, to = now;
    for (size_t i = 0; i < sizeof widths_s / sizeof *widths_s; i++) {
        int64_t width = widths_s[i] * NS_PER_S;
        if (closer && width < now)
            to = width;
        if (!closer && width > now) {
            to = width;
            break;
        }
    }
    to = to < narrowest_ns ? narrowest_ns : to > widest_ns ? widest_ns : to;
    live->view.span_ns = to;
    live_say(live, INK_DIM, "%lld s of traces", (long long)(to / NS_PER_S));
}

static void scroll(struct live *live, bool back)
{
    int64_t end = live->held_until_ns == NS_NONE ? live->now_ns : live->held_until_ns;
    end += (back ? -1 : 1) * live->view.span_ns / 2;
    live->held_until_ns = end >= live->now_ns ? NS_NONE : end;
    if (live->held_until_ns == NS_NONE)
        live_say(live, INK_DIM, "traces follow again");
}

bool live_view_key(struct live *live, uint32_t key)
{
    switch (key) {
    case '+':
    case '-':
        zoom(live, key == '+');
        break;
    case KEY_IS_LEFT:
    case KEY_IS_RIGHT:
        scroll(live, key == KEY_IS_LEFT);
        break;
    case KEY_IS_END:
        live->held_until_ns = NS_NONE;
        break;
    case KEY_IS_UP:
        live->first_lane -= live->first_lane > 0;
        break;
    case KEY_IS_DOWN:
        live->first_lane += live->first_lane + 1 < live->lane_count;
        break;
    default:
        return false;
    }
    live_follow(live);
    return true;
}
