/*
 * actions.h - the review screen's actions as C: made from actions.def.
 */
#ifndef TERMINAL_ACTIONS_H
#define TERMINAL_ACTIONS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum action {
    ACTION_NONE,
#define GROUP(name, heading)
#define ACTION(name, group, needs, key, shown, help) ACTION_##name,
#define ALSO(name, key)
#include "terminal/actions.def"
#undef GROUP
#undef ACTION
#undef ALSO
    ACTION_COUNT
};

enum action_group {
#define GROUP(name, heading) GROUP_##name,
#define ACTION(name, group, needs, key, shown, help)
#define ALSO(name, key)
#include "terminal/actions.def"
#undef GROUP
#undef ACTION
#undef ALSO
    GROUP_COUNT
};

/* What must be there for an action to work; bits. */
enum action_needs {
    NEEDS_ALWAYS = 0,
    NEEDS_LANE = 1,
    NEEDS_MARK = 2,
    NEEDS_WRITE = 4,
    NEEDS_CHANGE = NEEDS_MARK | NEEDS_WRITE,
};

struct action_entry {
    enum action action;
    enum action_group group;
    unsigned needs;    /* enum action_needs, or-ed */
    const char *shown; /* the key as the help panel shows it */
    const char *help;
};

/* Every action once, in the order of the table; NULL past the end. */
const struct action_entry *action_at(size_t index);
const struct action_entry *action_entry(enum action action);
const char *action_group_heading(enum action_group group);

/* The action of a key, ACTION_NONE when it has none. */
struct event;
enum action action_of_key(const struct event *event);

#endif
