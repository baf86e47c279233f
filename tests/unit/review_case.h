/*
 * review_case.h - a small case on disk for the review screen's tests: 60 s of three channels with
 * a known shape, an empty second half of one of them, and a short codebook.
 */
#ifndef TESTS_UNIT_REVIEW_CASE_H
#define TESTS_UNIT_REVIEW_CASE_H

#include "case/casefile.h"
#include "terminal/keys.h"
#include "terminal/review.h"

struct review_case {
    char folder[64];
    struct casefile *casefile;
    struct review *review;
    struct canvas canvas;
};

/* Makes everything, 80 x 24; asserts that it works. */
void review_case_open(struct review_case *made, enum store_mode mode);
void review_case_close(struct review_case *made);
void review_case_size(struct review_case *made, int rows, int columns);

/* Keys one after the other, as text; and one key that is none. */
void review_case_type(struct review_case *made, const char *text);
void review_case_press(struct review_case *made, uint32_t key);

/* Draws; is the text in a row? A row, valid until the next call. */
bool review_case_shows(struct review_case *made, const char *text);
const char *review_case_row(struct review_case *made, int row);
/* Cell of the first place where the text is; NULL when it is nowhere. */
const struct cell *review_case_cell(struct review_case *made, const char *text);

/* The store's marks. */
size_t review_case_marks(struct review_case *made, const struct mark **out);

#endif
