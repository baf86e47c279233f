/*
 * mark_json.c - a mark as the JSON object that history rows carry, and what differs between two.
 */
#include "store/store_impl.h"

static json_t *time_json(int64_t ns)
{
    return ns == NS_NONE ? json_null() : json_integer(ns);
}

static const char *text(const char *maybe)
{
    return maybe ? maybe : "";
}

json_t *mark_to_json(const struct mark *mark)
{
    return json_pack(
        "{s:s, s:o, s:o, s:o, s:s, s:s, s:s, s:s, s:s, s:s, s:I, s:s, s:o, s:o}", "code",
        mark->code, "onset_ns", time_json(mark->onset_ns), "until_ns", time_json(mark->until_ns),
        "value", mark->has_value ? json_real(mark->value) : json_null(), "unit", text(mark->unit),
        "route", text(mark->route), "note", text(mark->note), "state", mark_state_name(mark->state),
        "source", mark_source_name(mark->source), "rater", text(mark->rater), "error_ns",
        (json_int_t)mark->error_ns, "stamp_clock", text(mark->stamp_clock), "stamp_ns",
        time_json(mark->stamp_ns), "stamp_utc_ns", time_json(mark->stamp_utc_ns));
}

int json_difference(json_t *from, json_t *to, json_t **before, json_t **after, struct err *err)
{
    json_t *old = json_object(), *new = json_object(), *value;
    const char *key;
    bool good = old && new;
    json_object_foreach(to, key, value)
    {
        json_t *was = json_object_get(from, key);
        if (!good || json_equal(was, value))
            continue;
        good = json_object_set(old, key, was) == 0 && json_object_set(new, key, value) == 0;
    }
    if (!good) {
        json_decref(old);
        json_decref(new);
        return err_memory(err, "a change");
    }
    *before = old;
    *after = new;
    return ERR_OK;
}
