/*
 * joined_trace.h - traces that follow one another, as one: the parts of a stream that broke off.
 */
#ifndef TRACE_JOINED_TRACE_H
#define TRACE_JOINED_TRACE_H

#include "trace/trace.h"

/* Of `count` traces with runs, each beginning after the one before has begun its last run; where
 * the end of one reaches into the next (their clocks are fits), it ends there. ERR_CONFLICT when
 * they do not follow one another. Name, unit and role are the first one's. The parts must outlive
 * it. */
MUST_CHECK int joined_trace_new(const struct trace *const *parts, size_t count, struct trace **out,
                                struct err *err);

bool is_joined_trace(const struct trace *trace);
/* The parts that samples [first, first + count) lie in, one call each; stops at the first false. */
bool joined_trace_each(const struct trace *trace, int64_t first, int64_t count,
                       bool (*each)(const struct trace *part, int64_t first, int64_t count,
                                    void *context),
                       void *context);

#endif
