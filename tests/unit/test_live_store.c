/*
 * test_live_store.c - live sessions as the store keeps them: one at a time, each change once, and
 * the second place and back.
 */
#include "live_case.h"

#include <dirent.h>

TestSuite(live_store, .init = live_case_set_up, .fini = live_case_tear_down);

Test(live_store, a_second_session_is_refused_with_who_and_when)
{
    struct store *store = live_open();
    struct err err = {0};
    struct live_session one = live_session_here(), two = live_session_here();
    cr_assert_eq(store_session_begin(store, &one, false, &err), 0, "%s", err.text);
    cr_assert_eq(store_session_begin(store, &one, false, &err), 0, "the same again is no other");
    cr_assert_eq(store_session_begin(store, &two, false, &err), ERR_CONFLICT);
    cr_expect(strstr(err.text, "KM") && strstr(err.text, "since"), "%s", err.text);
    cr_expect(!strchr(err.text, '\n'));
    cr_assert_eq(store_session_end(store, one.uid, &err), 0);
    cr_expect_eq(store_session_begin(store, &two, false, &err), 0, "%s", err.text);
    store_close(store);
    cr_expect_eq(live_stored(), 0);
}

Test(live_store, a_session_whose_process_is_gone_is_in_nobodys_way)
{
    struct store *store = live_open();
    struct err err = {0};
    struct live_session gone = live_session_here(), reused = live_session_here();
    struct live_session other_boot = live_session_here(), now = live_session_here();
    gone.pid = 999999999;
    reused.process_start -= 1; /* the number was given to another process */
    (void)strcpy(other_boot.boot_id, "another");
    const struct live_session *old[] = {&gone, &reused, &other_boot};
    for (size_t i = 0; i < 3; i++) {
        bool runs = true;
        cr_expect(!live_session_alive(old[i]));
        cr_assert_eq(store_session_begin(store, old[i], false, &err), 0, "%s", err.text);
        cr_assert_eq(store_session_runs(store, old[i]->uid, &runs, &err), 0);
        cr_expect(!runs);
    }
    cr_expect_eq(store_session_begin(store, &now, false, &err), 0, "%s", err.text);
    store_close(store);
    cr_expect_eq(live_stored(), 0, "and all of it verifies");
}

Test(live_store, another_machines_session_needs_a_word)
{
    struct store *store = live_open();
    struct err err = {0};
    struct live_session there = live_session_here(), here = live_session_here();
    (void)strcpy(there.host, "elsewhere");
    (void)strcpy(there.machine, "other");
    cr_assert_eq(store_session_begin(store, &there, false, &err), 0);
    cr_assert_eq(store_session_begin(store, &here, false, &err), ERR_CONFLICT);
    cr_expect(strstr(err.text, "elsewhere") && strstr(err.text, "--take-over"), "%s", err.text);
    cr_expect_eq(store_session_begin(store, &here, true, &err), 0, "%s", err.text);
    store_close(store);
}

Test(live_store, the_first_session_fixes_the_start)
{
    struct store *store = live_open();
    struct err err = {0};
    struct live_session session = live_session_here(), last;
    bool any;
    cr_assert_eq(store_session_begin(store, &session, false, &err), 0);
    cr_expect_eq(store_header(store)->epoch_civil_ns, 1000 * NS_PER_S);
    cr_assert_eq(store_session_last(store, &last, &any, &err), 0);
    cr_expect(any && strcmp(last.uid, session.uid) == 0);
    store_close(store);
}

Test(live_store, a_change_is_done_once)
{
    struct store *store = live_open();
    struct err err = {0};
    struct live_session session = live_session_here();
    struct live_change add = live_add(1, 10, "a"), change = live_add(2, 10, "b");
    int64_t first = 0, again = 0, changed = 0;
    change.kind = LIVE_CHANGE;
    change.of_number = 1;
    cr_assert_eq(store_live_change(store, &session, &add, &first, &err), 0, "%s", err.text);
    cr_assert_eq(store_live_change(store, &session, &add, &again, &err), 0);
    cr_expect_eq(first, again);
    cr_assert_eq(store_live_change(store, &session, &change, &changed, &err), 0, "%s", err.text);
    cr_assert_eq(store_live_change(store, &session, &change, &changed, &err), 0);
    cr_expect_eq(changed, first);
    store_close(store);
    cr_expect_eq(live_stored(), 1);
}

Test(live_store, another_start_of_the_case_moves_the_sessions_times)
{
    struct store *store = live_open();
    struct err err = {0};
    struct live_session session = live_session_here();
    struct live_change add = live_add(1, 100 * NS_PER_S, "");
    const struct mark *marks;
    size_t count;
    int64_t id;
    /* A recording was attached before the session could be written. */
    cr_assert_eq(store_epoch_fix(store, 400 * NS_PER_S, &err), 0);
    cr_assert_eq(store_live_change(store, &session, &add, &id, &err), 0, "%s", err.text);
    cr_assert_eq(store_marks(store, &marks, &count, &err), 0);
    cr_expect_eq(marks[0].onset_ns, 700 * NS_PER_S);
    cr_expect_eq(marks[0].stamp_ns, 100 * NS_PER_S + 5, "a stamp never moves");
    store_close(store);
}

/* ---- second place ---- */

static struct second_place *place_of(const struct live_session *session, struct store *store)
{
    char id[CASE_ID_SIZE];
    struct second_place *place = NULL;
    struct err err = {0};
    cr_assert_eq(store_case_id(store, id, &err), 0);
    cr_assert_eq(second_place_new(id, live_path, session, &place, &err), 0, "%s", err.text);
    return place;
}

Test(live_store, the_second_place_comes_in_once)
{
    struct store *store = live_open();
    struct err err = {0};
    struct live_session session = live_session_here();
    struct second_place *place = place_of(&session, store);
    int64_t taken = 0, damaged = 0, files = 0, id;
    struct live_change first = live_add(1, 10, "in the case already"), change = live_add(3, 20, "");
    cr_assert_eq(store_live_change(store, &session, &first, &id, &err), 0);
    change.kind = LIVE_CHANGE;
    change.of_number = 2;
    change.mark.state = MARK_REJECTED;
    for (int i = 0; i < 2; i++) {
        struct live_change add = live_add(i + 1, 10 * (i + 1), "\xc3\xa4 \"quoted\"\nline");
        cr_assert_eq(second_place_put(place, &add, &err), 0, "%s", err.text);
    }
    cr_assert_eq(second_place_put(place, &change, &err), 0);
    second_place_free(place);
    cr_assert_eq(second_place_count(store, &files, &err), 0);
    cr_expect_eq(files, 1);
    cr_assert_eq(second_place_take(store, &taken, &damaged, &err), 0, "%s", err.text);
    cr_expect_eq(taken, 0, "its process runs: it brings its own in");
    store_close(store);

    /* The same file once its process is gone. */
    session.pid = 999999999;
    store = live_open();
    place = place_of(&session, store);
    for (int i = 0; i < 2; i++) {
        struct live_change add = live_add(i + 1, 10 * (i + 1), "\xc3\xa4 \"quoted\"\nline");
        cr_assert_eq(second_place_put(place, &add, &err), 0);
    }
    cr_assert_eq(second_place_put(place, &change, &err), 0);
    second_place_free(place);
    cr_assert_eq(second_place_take(store, &taken, &damaged, &err), 0, "%s", err.text);
    cr_expect_eq(taken, 3);
    cr_expect_eq(damaged, 0);
    cr_assert_eq(second_place_take(store, &taken, &damaged, &err), 0);
    cr_expect_eq(taken, 0);
    const struct mark *marks;
    size_t count;
    cr_assert_eq(store_marks(store, &marks, &count, &err), 0);
    cr_assert_eq(count, 2);
    cr_expect_str_eq(marks[0].note, "in the case already");
    cr_expect_eq(marks[1].state, MARK_REJECTED);
    store_close(store);
    cr_expect_eq(live_stored(), 2);
}

/* Cut, or with a byte changed, at every place: what is whole comes in, nothing else does, and the
 * file of damaged lines is kept. */
Test(live_store, a_damaged_second_place_gives_what_is_whole)
{
    struct err err = {0};
    struct live_session session = live_session_here();
    struct store *store = live_open();
    struct second_place *place = place_of(&session, store);
    char path[512];
    session.pid = 999999999;
    second_place_free(place);
    place = place_of(&session, store);
    for (int i = 0; i < 3; i++) {
        struct live_change add = live_add(i + 1, i, "");
        cr_assert_eq(second_place_put(place, &add, &err), 0, "%s", err.text);
    }
    (void)snprintf(path, sizeof path, "%s", second_place_path(place));
    second_place_free(place);
    struct mapped mapped;
    cr_assert_eq(disk_files.map(&disk_files, path, &mapped, &err), 0);
    uint8_t bytes[8192];
    size_t size = mapped.size;
    cr_assert_lt(size, sizeof bytes);
    memcpy(bytes, mapped.data, size);
    disk_files.unmap(&disk_files, &mapped);
    for (size_t at = 0; at < size; at += 37) {
        int64_t taken = 0, damaged = 0;
        bytes[at] ^= 1;
        FILE *file = fopen(path, "w");
        cr_assert_eq(fwrite(bytes, 1, size, file), size);
        cr_assert_eq(fclose(file), 0);
        bytes[at] ^= 1;
        cr_assert_eq(second_place_take(store, &taken, &damaged, &err), 0, "%s", err.text);
        cr_expect_gt(damaged, 0, "byte %zu", at);
        cr_expect_leq(taken, 2, "byte %zu", at);
    }
    store_close(store);
    cr_expect_leq(live_stored(), 3, "however often");
}
