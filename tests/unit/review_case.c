/*
 * review_case.c - making the case, typing into it, reading its canvas.
 */
#include "unit/review_case.h"

#include <criterion/criterion.h>

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "recording/edf_writer.h"

enum { SECONDS = 60, RATE = 100 };

static const char codebook[] = "code,label,key,kind,unit,class\n"
                               "incision,incision,i,point,,surgery\n"
                               "cautery,cautery,c,span,,surgery\n"
                               "propofol,propofol,p,dose,mg,induction\n"
                               "remark,remark,n,note,,\n";

/* ECG: 1 mV for 20 ms each second; ABP: a ramp from 60 to 120 each second; SpO2: the second. */
static void write_recording(const char *path)
{
    const struct edf_channel_spec channels[] = {
        {"ECG II", "mV", "", "", -5, 5, 0, 0, RATE},
        {"ABP", "mmHg", "", "", -50, 300, 0, 0, RATE},
        {"SpO2", "%", "", "", 0, 100, 0, 0, RATE},
    };
    /* 2031-05-20 09:30:00 */
    struct civil start = {2031, 5, 20, 9, 30, 0, 0};
    const struct edf_spec spec = {.start_civil_ns = civil_to_ns(&start),
                                  .record_ns = NS_PER_S,
                                  .channels = channels,
                                  .channel_count = 3};
    struct edf_writer *writer;
    cr_assert_eq(edf_writer_open(path, &spec, &writer, NULL), 0);
    for (int second = 0; second < SECONDS; second++) {
        float samples[3 * RATE];
        for (int i = 0; i < RATE; i++) {
            samples[i] = i >= 50 && i < 52 ? 1 : 0;
            samples[RATE + i] = 60 + 60 * (float)i / RATE;
            samples[2 * RATE + i] = (float)second;
        }
        cr_assert_eq(edf_writer_record(writer, 0, samples, NULL), 0);
    }
    cr_assert_eq(edf_writer_close(writer, NULL), 0);
}

void review_case_open(struct review_case *made, enum store_mode mode)
{
    char edf[96], path[96];
    struct err err = {0};
    *made = (struct review_case){.folder = "/tmp/incisura-test-XXXXXX"};
    cr_assert_not_null(mkdtemp(made->folder));
    (void)snprintf(edf, sizeof edf, "%s/a.edf", made->folder);
    (void)snprintf(path, sizeof path, "%s/S-1.case", made->folder);
    write_recording(edf);
    const struct case_header header = {.subject = "S-1",
                                       .procedure = "hernia repair",
                                       .rater = "KM",
                                       .codebook_text = codebook,
                                       .codebook_size = sizeof codebook - 1,
                                       .epoch_civil_ns = NS_NONE};
    cr_assert_eq(store_create(path, &header, &err), 0, "%s", err.text);
    cr_assert_eq(casefile_open(path, STORE_WRITE, NULL, NULL, &made->casefile, &err), 0, "%s",
                 err.text);
    cr_assert_eq(casefile_attach(made->casefile, edf, NULL, NULL, &err), 0, "%s", err.text);
    if (mode == STORE_READ) {
        casefile_close(made->casefile);
        cr_assert_eq(casefile_open(path, STORE_READ, NULL, NULL, &made->casefile, &err), 0, "%s",
                     err.text);
    }
    cr_assert_eq(review_new(made->casefile, &made->review, &err), 0, "%s", err.text);
    review_case_size(made, 24, 80);
}

void review_case_close(struct review_case *made)
{
    char command[128];
    review_free(made->review);
    casefile_close(made->casefile);
    canvas_free(&made->canvas);
    (void)snprintf(command, sizeof command, "rm -r %s", made->folder);
    cr_assert_eq(system(command), 0);
}

void review_case_size(struct review_case *made, int rows, int columns)
{
    cr_assert_eq(review_resize(made->review, rows, columns, NULL), 0);
    cr_assert_eq(canvas_resize(&made->canvas, rows, columns, NULL), 0);
}

void review_case_press(struct review_case *made, uint32_t key)
{
    review_key(made->review, &(struct event){.kind = EVENT_KEY, .key = key});
}

void review_case_type(struct review_case *made, const char *text)
{
    while (*text)
        review_case_press(made, utf8_next(&text));
}

const char *review_case_row(struct review_case *made, int row)
{
    static char text[4 * 512 + 1];
    size_t at = 0;
    for (int column = 0; column < made->canvas.columns && column < 512; column++) {
        uint32_t glyph = made->canvas.cells[row * made->canvas.columns + column].glyph;
        at += utf8_put(text + at, glyph ? glyph : ' ');
    }
    while (at > 0 && text[at - 1] == ' ')
        at--;
    text[at] = '\0';
    return text;
}

bool review_case_shows(struct review_case *made, const char *text)
{
    return review_case_cell(made, text) != NULL;
}

const struct cell *review_case_cell(struct review_case *made, const char *text)
{
    review_draw(made->review, &made->canvas);
    for (int row = 0; row < made->canvas.rows; row++) {
        const char *line = review_case_row(made, row), *found = strstr(line, text);
        if (!found)
            continue;
        int column = 0;
        while (line < found)
            column += utf8_next(&line) != 0;
        return &made->canvas.cells[row * made->canvas.columns + column];
    }
    return NULL;
}

size_t review_case_marks(struct review_case *made, const struct mark **out)
{
    size_t count;
    cr_assert_eq(store_marks(casefile_store(made->casefile), out, &count, NULL), 0);
    return count;
}
