/*
 * actions.c - actions.def as tables. Acts on nothing.
 */
#include "terminal/actions.h"

#include "terminal/keys.h"

#define GROUP(name, heading) [GROUP_##name] = (heading),
#define ACTION(name, group, needs, key, shown, help)
#define ALSO(name, key)
static const char *const headings[] = {
#include "terminal/actions.def"
};
#undef GROUP
#undef ACTION

#define GROUP(name, heading)
#define ACTION(name, group, needs, key, shown, help) \
    {ACTION_##name, GROUP_##group, NEEDS_##needs, shown, help},
static const struct action_entry entries[] = {
#include "terminal/actions.def"
};
#undef ACTION
#undef ALSO

#define ACTION(name, group, needs, key, shown, help) {(key), ACTION_##name},
#define ALSO(name, key)                              {(key), ACTION_##name},
static const struct {
    uint32_t key;
    enum action action;
} keys[] = {
#include "terminal/actions.def"
};
#undef GROUP
#undef ACTION
#undef ALSO

const struct action_entry *action_at(size_t index)
{
    return index < sizeof entries / sizeof *entries ? &entries[index] : NULL;
}

const struct action_entry *action_entry(enum action action)
{
    /* The table is in the order of the enumeration, which begins with ACTION_NONE. */
    return action > ACTION_NONE && action < ACTION_COUNT ? &entries[action - 1] : NULL;
}

const char *action_group_heading(enum action_group group)
{
    return headings[group];
}

enum action action_of_key(const struct event *event)
{
    for (size_t i = 0; event->kind == EVENT_KEY && i < sizeof keys / sizeof *keys; i++) {
        if (keys[i].key == event->key)
            return keys[i].action;
    }
    return ACTION_NONE;
}
