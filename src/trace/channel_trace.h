/*
 * channel_trace.h - a recording's channel laid on case time, as a trace.
 *
 * Takes its extremes from an overview where one is given and built, from the samples otherwise.
 */
#ifndef TRACE_CHANNEL_TRACE_H
#define TRACE_CHANNEL_TRACE_H

#include "timeline/clock_map.h"
#include "trace/overview.h"
#include "trace/trace.h"

/* `name` is copied. The recording and (if not NULL) the overview must outlive the trace. */
MUST_CHECK int channel_trace_new(const struct recording *recording, size_t channel,
                                 const char *name, const struct clock_map *map, struct trace **out,
                                 struct err *err);

/* For a trace made by channel_trace_new() alone. */
void channel_trace_set_overview(struct trace *trace, const struct overview *overview);
bool is_channel_trace(const struct trace *trace);

/* Extremes without waiting and in constant time: from the overview, or by reading when the range
 * is short. false = not built yet. */
bool channel_trace_minmax(const struct trace *trace, int64_t first, int64_t count, float *low,
                          float *high);

#endif
