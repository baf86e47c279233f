/*
 * test_review.c - the review screen without a terminal: keys into the model, the store afterwards,
 * the canvas cell by cell.
 */
#include <criterion/criterion.h>

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "unit/review_case.h"

Test(review, first_frame_has_every_part_in_its_place)
{
    struct review_case made;
    review_case_open(&made, STORE_WRITE);
    review_draw(made.review, &made.canvas);
    static const struct {
        int row;
        const char *text;
    } rows[] = {{0, " S-1  hernia repair"},
                {0, "0 marks  SAVED"},
                {3, " time of day      \u257509:30:00"},
                {4, "\u25b8ECG II  "},
                {5, "  0.00 mV"},
                {8, " ABP "},
                {9, "60.0 mmHg"},
                {12, " SpO2 "},
                {21, " no marks yet"},
                {22, " 09:30:00.000  +00:00:00.000  10.000 s shown"},
                {23, " letters drop marks at the cursor"}};
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++)
        cr_expect(strstr(review_case_row(&made, rows[i].row), rows[i].text), "row %d is: %s",
                  rows[i].row, review_case_row(&made, rows[i].row));
    cr_expect_eq(made.canvas.cells[0].ink, INK_BAR);
    review_case_close(&made);
}

/* ABP rises from 60 to 120 in one second and falls at its end; ECG stands still but for two samples
 * from 0.50 s on. At 1 s a screen a cell holds 16 ms. */
Test(review, a_trace_is_where_its_samples_are)
{
    struct review_case made;
    review_case_open(&made, STORE_WRITE);
    review_look(made.review, 0, NS_PER_S, false);
    review_draw(made.review, &made.canvas);
    int last = -1, rising = 0;
    for (int column = 19; column < 79; column++) {
        for (int row = 8; row < 12; row++) {
            uint32_t glyph = made.canvas.cells[row * 80 + column].glyph;
            if (glyph < 0x2800 || glyph > 0x28ff)
                continue;
            cr_expect_eq(made.canvas.cells[row * 80 + column].ink, INK_TRACE_B);
            rising += last < 0 || row <= last;
            last = row;
            break;
        }
    }
    cr_expect_eq(rising, 60, "a ramp has a dot in every column and never falls");
    for (int column = 19; column < 80; column++) {
        bool top = (made.canvas.cells[4 * 80 + column].glyph & ~0xffu) == 0x2800;
        int64_t from = (column - 18) * NS_PER_S / 62, to = (column - 17) * NS_PER_S / 62;
        bool pulse = to > 500 * NS_PER_MS && from < 510 * NS_PER_MS;
        bool flank = to > 490 * NS_PER_MS && from < 520 * NS_PER_MS;
        cr_expect(top ? flank : !pulse, "column %d", column);
    }
    review_case_close(&made);
}

Test(review, letters_drop_marks_at_the_cursor_and_history_has_them)
{
    int64_t rows, bad;
    char head[DIGEST_TEXT_SIZE];
    struct review_case made;
    const struct mark *marks;
    review_case_open(&made, STORE_WRITE);
    review_case_type(&made, ">>i");
    cr_assert_eq(review_case_marks(&made, &marks), 1);
    cr_expect_str_eq(marks[0].code, "incision");
    cr_expect_eq(marks[0].onset_ns, 2 * NS_PER_S);
    cr_expect_eq(marks[0].state, MARK_MARKED);
    cr_expect_eq(marks[0].source, MARK_REVIEW);
    cr_expect_str_eq(marks[0].rater, "KM");
    cr_expect_gt(marks[0].error_ns, 0, "a column has a width");
    cr_expect(review_case_shows(&made, "saved:"));
    cr_expect(review_case_shows(&made, "1 mark  SAVED"));
    const struct cell *flag = review_case_cell(&made, "i incision  09:30:02.000");
    cr_assert_not_null(flag);
    cr_expect_eq(flag->ink, INK_MARK);
    review_case_type(&made, "Z");
    cr_expect(review_case_shows(&made, "no code has the key 'Z'"));
    cr_expect_eq(store_verify(casefile_store(made.casefile), &rows, &bad, head, NULL), 0);
    review_case_close(&made);
}

Test(review, a_span_is_closed_by_its_own_letter)
{
    struct review_case made;
    const struct mark *marks;
    review_case_open(&made, STORE_WRITE);
    review_case_type(&made, ">c");
    cr_assert_eq(review_case_marks(&made, &marks), 1);
    cr_expect_eq(marks[0].until_ns, NS_NONE);
    cr_expect_eq(marks[0].state, MARK_INCOMPLETE);
    cr_expect(review_case_shows(&made, "still open"));
    cr_expect(review_case_shows(&made, "c?\u2505"), "an open span is dashed and questioned");
    review_case_type(&made, ">>c");
    cr_assert_eq(review_case_marks(&made, &marks), 1);
    cr_expect_eq(marks[0].until_ns, 3 * NS_PER_S);
    cr_expect_eq(marks[0].state, MARK_MARKED);
    cr_expect(review_case_shows(&made, "c\u2501"), "a closed span is a line");
    review_case_type(&made, ">c");
    cr_expect_eq(review_case_marks(&made, &marks), 2, "then it opens another one");
    review_case_close(&made);
}

Test(review, a_dose_asks_and_offers_what_was_given_last)
{
    struct review_case made;
    const struct mark *marks;
    review_case_open(&made, STORE_WRITE);
    review_case_type(&made, "p");
    cr_expect(review_case_shows(&made, "propofol, value in mg:"));
    cr_assert_eq(review_case_marks(&made, &marks), 1, "it is saved before it asks");
    review_case_type(&made, "twelve\r");
    cr_expect(review_case_shows(&made, "a number, then perhaps a unit"));
    review_case_press(&made, KEY_IS_CTRL('u'));
    review_case_type(&made, "0,1 mcg/kg/min\r");
    cr_assert_eq(review_case_marks(&made, &marks), 1);
    cr_expect(marks[0].has_value && marks[0].value == 0.1, "a decimal comma is a point");
    cr_expect_str_eq(marks[0].unit, "ug/kg/min", "and a common unit its UCUM code");
    review_case_type(&made, ">p\r");
    cr_assert_eq(review_case_marks(&made, &marks), 2);
    cr_expect(marks[1].has_value && marks[1].value == 0.1 && marks[1].state == MARK_MARKED);
    review_case_type(&made, ">p50\r");
    cr_assert_eq(review_case_marks(&made, &marks), 3);
    cr_expect(marks[2].value == 50, "typing replaces the offer");
    cr_expect_str_eq(marks[2].unit, "mg");
    review_case_type(&made, ">p");
    review_case_press(&made, KEY_IS_ESCAPE);
    cr_assert_eq(review_case_marks(&made, &marks), 4);
    cr_expect_eq(marks[3].state, MARK_INCOMPLETE);
    cr_expect(review_case_shows(&made, "1 incomplete"));
    review_case_close(&made);
}

Test(review, marks_are_moved_noted_confirmed_rejected_and_all_of_it_undone)
{
    int64_t rows, bad;
    char head[DIGEST_TEXT_SIZE];
    struct review_case made;
    const struct mark *marks;
    review_case_open(&made, STORE_WRITE);
    review_case_type(&made, ">i%:");
    review_case_marks(&made, &marks);
    cr_expect_eq(marks[0].onset_ns, NS_PER_S + 100 * NS_PER_MS, "nudged by 0.1 s");
    cr_expect_eq(review_cursor(made.review), marks[0].onset_ns, "the cursor goes along");
    review_case_type(&made, ">@");
    review_case_marks(&made, &marks);
    cr_expect_eq(marks[0].onset_ns, 2 * NS_PER_S + 100 * NS_PER_MS, "brought to the cursor");
    review_case_press(&made, KEY_IS_F(2));
    review_case_press(&made, KEY_IS_CTRL('u'));
    review_case_type(&made, "09:30:07.25\r");
    review_case_marks(&made, &marks);
    cr_expect_eq(marks[0].onset_ns, 7250 * NS_PER_MS, "typed as time of day");
    review_case_press(&made, KEY_IS_F(5));
    review_case_type(&made, "scalpel \u00fc\r");
    review_case_marks(&made, &marks);
    cr_expect_str_eq(marks[0].note, "scalpel \u00fc");
    review_case_type(&made, "!");
    review_case_marks(&made, &marks);
    cr_expect_eq(marks[0].state, MARK_CONFIRMED);
    review_case_press(&made, KEY_IS_DELETE);
    review_case_marks(&made, &marks);
    cr_expect_eq(marks[0].state, MARK_REJECTED);
    cr_expect(review_case_shows(&made, "i\u00d7"), "a rejected mark has its cross");
    for (int i = 0; i < 7; i++)
        review_case_press(&made, KEY_IS_BACKSPACE);
    size_t count = review_case_marks(&made, &marks);
    cr_expect(count == 1 && marks[0].state == MARK_REJECTED && marks[0].onset_ns == NS_PER_S,
              "seven changes back, and the mark itself taken back");
    review_case_press(&made, KEY_IS_BACKSPACE);
    cr_expect(review_case_shows(&made, "nothing to undo"));
    for (int i = 0; i < 5; i++)
        review_case_press(&made, KEY_IS_CTRL('r'));
    review_case_marks(&made, &marks);
    cr_expect_str_eq(marks[0].note, "scalpel \u00fc");
    cr_expect_eq(store_verify(casefile_store(made.casefile), &rows, &bad, head, NULL), 0);
    review_case_close(&made);
}

Test(review, enter_on_an_offered_time_changes_nothing)
{
    struct review_case made;
    const struct mark *marks;
    review_case_open(&made, STORE_WRITE);
    review_case_press(&made, KEY_IS_RIGHT);
    review_case_type(&made, "i");
    review_case_marks(&made, &marks);
    int64_t onset = marks[0].onset_ns;
    cr_assert_neq(onset % NS_PER_MS, 0, "a column does not begin on a millisecond");
    review_case_press(&made, KEY_IS_F(2));
    review_case_press(&made, KEY_IS_ENTER);
    review_case_marks(&made, &marks);
    cr_expect_eq(marks[0].onset_ns, onset);
    review_case_close(&made);
}

Test(review, the_mouse_points_and_its_wheel_zooms)
{
    struct review_case made;
    review_case_open(&made, STORE_WRITE);
    review_case_type(&made, ">i>>>c");
    struct event press = {.kind = EVENT_MOUSE, .mouse = MOUSE_PRESS, .row = 9, .column = 18 + 31};
    review_key(made.review, &press);
    cr_expect_float_eq(s_from_ns(review_cursor(made.review)), 5.08, 0.09, "half way across 10 s");
    press.row = 18;
    review_key(made.review, &press);
    cr_expect_eq(review_cursor(made.review), NS_PER_S, "the list's first mark");
    press.row = 1;
    press.column = 40;
    review_key(made.review, &press);
    cr_expect_eq(review_cursor(made.review), 30 * NS_PER_S, "half way along the strip");
    press.mouse = MOUSE_WHEEL_UP;
    review_key(made.review, &press);
    cr_expect(review_case_shows(&made, "5.000 s shown"));
    review_case_close(&made);
}

Test(review, steps_go_from_mark_to_mark)
{
    struct review_case made;
    const struct mark *marks;
    review_case_open(&made, STORE_WRITE);
    review_case_type(&made, ">i>c>i>>c>i");
    size_t count = review_case_marks(&made, &marks);
    cr_assert_eq(count, 4);
    static const struct {
        const char *keys;
        int64_t second;
    } steps[] = {{"[", 3}, {"[", 2}, {"[", 1}, {"[", 1}, {"]", 2},  {"]", 3},
                 {"]", 6}, {"{", 3}, {"{", 1}, {"}", 3}, {"<[", 1}, {")", 2}};
    for (size_t i = 0; i < sizeof steps / sizeof *steps; i++) {
        review_case_type(&made, steps[i].keys);
        cr_expect_eq(review_cursor(made.review), steps[i].second * NS_PER_S,
                     "step %zu '%s' came to %lld", i, steps[i].keys,
                     (long long)review_cursor(made.review));
    }
    review_case_close(&made);
}

Test(review, time_is_moved_and_zoomed_within_the_case)
{
    struct review_case made;
    review_case_open(&made, STORE_WRITE);
    review_case_press(&made, KEY_IS_END);
    cr_expect_eq(review_cursor(made.review), 60 * NS_PER_S - 1);
    cr_expect(review_case_shows(&made, "10.000 s shown"));
    review_case_type(&made, "0");
    cr_expect(review_case_shows(&made, "60.000 s shown"));
    for (int i = 0; i < 40; i++)
        review_case_type(&made, "+");
    cr_expect(review_case_shows(&made, "1.0 ms shown"), "closer than one sample");
    for (int i = 0; i < 40; i++)
        review_case_type(&made, "-");
    cr_expect(review_case_shows(&made, "60.000 s shown"));
    review_case_press(&made, KEY_IS_HOME);
    review_case_type(&made, "..,");
    cr_expect_eq(review_cursor(made.review), 10 * NS_PER_MS, "samples are 10 ms apart");
    review_case_press(&made, KEY_IS_CTRL('g'));
    review_case_press(&made, KEY_IS_CTRL('u'));
    review_case_type(&made, "+00:00:30\r");
    cr_expect_eq(review_cursor(made.review), 30 * NS_PER_S);
    review_case_type(&made, " >");
    cr_expect(review_case_shows(&made, "difference 1.000 s (60.0/min)"));
    cr_expect(review_case_shows(&made, "\u03941.0"), "SpO2 counts seconds");
    review_case_close(&made);
}

Test(review, lanes_are_hidden_moved_scaled_and_filtered)
{
    struct review_case made;
    review_case_open(&made, STORE_WRITE);
    review_case_press(&made, KEY_IS_DOWN);
    cr_expect(review_case_shows(&made, "\u25b8ABP"));
    review_case_type(&made, "\"");
    review_draw(made.review, &made.canvas);
    cr_expect(strstr(review_case_row(&made, 4), "\u25b8ABP"), "moved to the top");
    review_case_type(&made, "|");
    cr_expect_not(review_case_shows(&made, " mmHg"));
    review_case_type(&made, "\\");
    cr_expect(review_case_shows(&made, " mmHg"));
    review_case_type(&made, "*");
    cr_expect(review_case_shows(&made, "a division"));
    cr_expect(review_case_shows(&made, "="), "a gain by hand is marked");
    review_case_type(&made, "~");
    review_case_press(&made, KEY_IS_F(6));
    cr_expect(review_case_shows(&made, "drawn through >0.05 Hz"));
    review_case_press(&made, KEY_IS_F(8));
    cr_expect(review_case_shows(&made, "drawn through >0.05 Hz"), "100 Hz carry no notch at 50 Hz");
    review_case_close(&made);
}

Test(review, a_case_for_reading_says_so_and_changes_nothing)
{
    struct review_case made;
    const struct mark *marks;
    review_case_open(&made, STORE_READ);
    cr_expect(review_case_shows(&made, "READ-ONLY"));
    review_case_type(&made, "i");
    cr_expect(review_case_shows(&made, "read-only: this case cannot be changed here"));
    cr_expect_eq(review_case_marks(&made, &marks), 0);
    review_case_type(&made, "?");
    cr_expect_not(review_case_shows(&made, "undo the last change"), "help shows what works now");
    review_case_close(&made);
}

Test(review, a_recording_that_is_gone_is_told_and_the_marks_stay)
{
    struct review_case made;
    char path[128];
    review_case_open(&made, STORE_WRITE);
    review_case_type(&made, ">i");
    review_free(made.review);
    casefile_close(made.casefile);
    (void)snprintf(path, sizeof path, "%s/a.edf", made.folder);
    cr_assert_eq(remove(path), 0);
    (void)snprintf(path, sizeof path, "%s/S-1.case", made.folder);
    cr_assert_eq(casefile_open(path, STORE_WRITE, NULL, NULL, &made.casefile, NULL), 0);
    cr_assert_eq(review_new(made.casefile, &made.review, NULL), 0);
    review_case_size(&made, 24, 80);
    cr_expect(review_case_shows(&made, "recording 1 of 1 cannot be read"));
    cr_expect(review_case_shows(&made, "no trace can be shown"));
    cr_expect(review_case_shows(&made, "incision"));
    review_case_press(&made, KEY_IS_DOWN);
    cr_expect(review_case_shows(&made, "no trace is shown"));
    review_case_close(&made);
}

/* A trigger stands in for a full disk: the mark must be kept, shown and saved later. */
Test(review, a_mark_that_cannot_be_saved_is_kept_and_tried_again)
{
    struct review_case made;
    const struct mark *marks;
    char path[128], sql[256];
    review_case_open(&made, STORE_WRITE);
    (void)snprintf(path, sizeof path, "%s/S-1.case", made.folder);
    (void)snprintf(sql, sizeof sql,
                   "sqlite3 %s \"CREATE TRIGGER full BEFORE INSERT ON history BEGIN "
                   "SELECT RAISE(ABORT, 'disk full'); END\"",
                   path);
    cr_assert_eq(system(sql), 0);
    review_case_type(&made, ">i");
    cr_expect_eq(review_case_marks(&made, &marks), 0);
    const struct cell *loud = review_case_cell(&made, "NOT SAVED 1");
    cr_assert_not_null(loud);
    cr_expect_eq(loud->ink, INK_ALARM);
    review_case_press(&made, KEY_IS_CTRL('q'));
    cr_expect_not(review_done(made.review), "one does not leave by accident");
    (void)review_tick(made.review);
    cr_expect(review_case_shows(&made, "NOT SAVED 1"));
    struct err err = {0};
    cr_expect_eq(review_leave(made.review, &err), ERR_IO, "told again when the program ends");
    cr_expect(strstr(err.text, "incision at +00:00:01.000"), "%s", err.text);
    (void)snprintf(sql, sizeof sql, "sqlite3 %s 'DROP TRIGGER full'", path);
    cr_assert_eq(system(sql), 0);
    cr_expect(review_tick(made.review));
    cr_assert_eq(review_case_marks(&made, &marks), 1);
    cr_expect_eq(marks[0].onset_ns, NS_PER_S);
    cr_expect(review_case_shows(&made, "1 mark  SAVED"));
    cr_expect_eq(review_leave(made.review, &err), 0);
    review_case_press(&made, KEY_IS_CTRL('q'));
    cr_expect(review_done(made.review));
    review_case_close(&made);
}

Test(review, every_size_is_drawn_and_the_cursor_line_stays)
{
    struct review_case made;
    review_case_open(&made, STORE_WRITE);
    review_case_type(&made, ">i>cp1\r n");
    review_case_press(&made, KEY_IS_ESCAPE);
    static const int sizes[][2] = {{1, 1},    {1, 20},   {2, 3},    {3, 80},  {5, 20},   {8, 30},
                                   {10, 40},  {12, 59},  {16, 60},  {22, 80}, {24, 119}, {24, 120},
                                   {30, 160}, {60, 200}, {60, 260}, {200, 36}};
    for (size_t i = 0; i < sizeof sizes / sizeof *sizes; i++) {
        review_case_size(&made, sizes[i][0], sizes[i][1]);
        for (int help = 0; help < 2; help++) {
            review_draw(made.review, &made.canvas);
            if (sizes[i][1] >= 20 && help == 0)
                cr_expect(review_case_shows(&made, "09:30:02"), "%d x %d", sizes[i][0],
                          sizes[i][1]);
            review_case_type(&made, "?");
        }
    }
    review_case_close(&made);
}

Test(review, every_key_of_the_table_does_something_or_says_why_not)
{
    for (int filled = 0; filled < 2; filled++) {
        struct review_case made;
        review_case_open(&made, filled ? STORE_WRITE : STORE_READ);
        for (size_t i = 0; action_at(i); i++) {
            const struct action_entry *entry = action_at(i);
            if (filled)
                review_case_type(&made, ">i");
            review_action(made.review, entry->action);
            review_draw(made.review, &made.canvas);
            cr_expect_eq(action_entry(entry->action), entry);
            cr_expect(*entry->shown && *entry->help);
            review_case_press(&made, KEY_IS_ESCAPE);
        }
        review_case_close(&made);
    }
}

/* Any key after any other, at any size, drawn each time: nothing breaks, and the history holds. */
Test(review, any_keys_in_any_order_leave_a_sound_case)
{
    struct review_case made;
    unsigned seed = 12;
    int64_t rows, bad;
    char head[DIGEST_TEXT_SIZE];
    struct err err = {0};
    review_case_open(&made, STORE_WRITE);
    for (int i = 0; i < 12000; i++) {
        seed = seed * 1103515245u + 12345u;
        unsigned roll = seed >> 16;
        if (roll % 97 == 0)
            review_case_size(&made, 1 + (int)(roll / 97 % 70), 1 + (int)(roll / 7 % 210));
        else if (roll % 13 == 0)
            review_case_press(&made, KEY_IS_ESCAPE); /* out of the line being typed */
        else if (roll % 3 == 0)
            review_case_press(&made, KEY_IS_LEFT + roll / 3 % (KEY_IS_LAST - KEY_IS_LEFT + 1));
        else
            review_case_press(&made, roll / 3 % 128);
        if (i % 50 == 0)
            (void)review_tick(made.review);
        review_draw(made.review, &made.canvas);
    }
    cr_expect_eq(store_verify(casefile_store(made.casefile), &rows, &bad, head, &err), 0, "%s",
                 err.text);
    cr_expect_gt(rows, 100, "%lld changes were made", (long long)rows);
    review_case_close(&made);
}
