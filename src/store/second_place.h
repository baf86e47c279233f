/*
 * second_place.h - where changes of marks go while the case itself cannot be written, and how they
 * come back.
 *
 * One file a session, $XDG_STATE_HOME/incisura/unsaved/CASE-ID/SESSION.lines (~/.local/state when
 * the variable is not set): one line a change, each with a digest of its own, synced before it is
 * said to be kept. The file appears with the first change and goes when the case has them all.
 * Changes are done once however often they are taken in (live.h), so nothing here needs to know
 * how far the case got.
 */
#ifndef STORE_SECOND_PLACE_H
#define STORE_SECOND_PLACE_H

#include "store/live.h"

struct second_place;

/* Touches no disk yet. `case_path` is written into the file for people to read. */
MUST_CHECK int second_place_new(const char *case_id, const char *case_path,
                                const struct live_session *session, struct second_place **out,
                                struct err *err);
void second_place_free(struct second_place *place);
const char *second_place_path(const struct second_place *place);

/* Appends a change and syncs it. */
MUST_CHECK int second_place_put(struct second_place *place, const struct live_change *change,
                                struct err *err);
/* The case has everything: removes the file, if there is one. */
MUST_CHECK int second_place_clear(struct second_place *place, struct err *err);

/* Brings in what lies in the second place of this case, but for sessions that still run (their own
 * program does it). *taken counts the changes. A line that is damaged is left out, the file then
 * kept as NAME.damaged and *damaged counted; a file that cannot be taken in stays as it is. */
MUST_CHECK int second_place_take(struct store *store, int64_t *taken, int64_t *damaged,
                                 struct err *err);
/* How many files lie there for this case: for a program that only reads. */
MUST_CHECK int second_place_count(struct store *store, int64_t *out, struct err *err);

#endif
