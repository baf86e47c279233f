/*
 * test_recipe.c - recipes: what they say, and what is refused, with its line.
 */
#include <criterion/criterion.h>

#include <string.h>

#include "window/recipe.h"

static struct codebook *book(void)
{
    static const char text[] = "code,key,kind,unit\nincision,i,point,\nintubation,t,point,\n"
                               "cautery,c,span,\npropofol,p,dose,mg\n";
    struct codebook *made = NULL;
    struct err err = {0};
    cr_assert_eq(codebook_parse(text, sizeof text - 1, "book", &made, &err), 0, "%s", err.text);
    return made;
}

static int parse(const char *text, struct recipe **out, struct err *err)
{
    struct codebook *codebook = book();
    int failed = recipe_parse(text, strlen(text), "r.ini", codebook, out, err);
    codebook_free(codebook);
    return failed;
}

#define WINDOW  "[window]\nbefore = 30\nafter = 60\nrate = 4\n"
#define SIGNALS "[signals]\nhr = heart-rate\n"

Test(recipe, the_least_one_that_runs)
{
    struct recipe *recipe = NULL;
    struct err err = {0};
    cr_assert_eq(parse("[events]\ncodes = incision, intubation\n" WINDOW
                       "baseline = -30..-5\nvalid = 0.8\n" SIGNALS,
                       &recipe, &err),
                 0, "%s", err.text);
    cr_expect_eq(recipe->code_count, 2);
    cr_expect_str_eq(recipe->codes[1], "intubation");
    cr_expect(recipe->states[MARK_INCOMPLETE] && recipe->states[MARK_CONFIRMED] &&
              !recipe->states[MARK_REJECTED]);
    cr_expect_eq(recipe->samples, 360);
    cr_expect_eq(recipe->before_ns, 30 * NS_PER_S);
    cr_expect(recipe->has_baseline && recipe->baseline_from_ns == -30 * NS_PER_S &&
              recipe->baseline_to_ns == -5 * NS_PER_S);
    cr_expect_eq(recipe->baseline_mode, BASELINE_NONE);
    cr_expect_eq(recipe->valid_share, 0.8);
    cr_expect_eq(recipe_time_s(recipe, 0), -30);
    cr_expect_eq(recipe_time_s(recipe, 120), 0);
    cr_expect_str_eq(recipe->signals[0].derivation->name, "heart-rate");
    recipe_free(recipe);
}

Test(recipe, everything_that_can_be_said)
{
    struct recipe *recipe = NULL;
    struct err err = {0};
    cr_assert_eq(parse("; a comment\n[events]\ncodes = *\nstates = confirmed\nfirst = yes\n"
                       "least-distance = 1min\nnot-within = -120..60 s of cautery\n"
                       "not-within = 0..5 of incision\n"
                       "[window]\nbefore = 500ms\nafter = 2 s\nrate = 100 Hz\n"
                       "baseline = -0.5..0 median percent\nvalid = 90%\nage = 2min\n"
                       "[signals]\nhr = heart-rate rate=8\neda = channel \"EDA left\"\n",
                       &recipe, &err),
                 0, "%s", err.text);
    cr_expect_eq(recipe->code_count, 0);
    cr_expect(recipe->states[MARK_CONFIRMED] && !recipe->states[MARK_MARKED]);
    cr_expect(recipe->first && recipe->least_distance_ns == 60 * NS_PER_S);
    cr_expect_eq(recipe->exclusion_count, 2);
    cr_expect(recipe->exclusions[0].from_ns == -120 * NS_PER_S &&
              recipe->exclusions[0].to_ns == 60 * NS_PER_S);
    cr_expect_eq(recipe->samples, 250);
    cr_expect_eq(recipe->baseline_mode, BASELINE_PERCENT);
    cr_expect_eq(recipe->baseline_statistic, BASELINE_MEDIAN);
    cr_expect_float_eq(recipe->valid_share, 0.9, 1e-12);
    cr_expect_eq(recipe->age_ns, 120 * NS_PER_S);
    cr_expect_eq(recipe->signals[0].setting_count, 1);
    cr_expect_str_eq(recipe->signals[1].channel, "EDA left");
    recipe_free(recipe);
}

Test(recipe, each_error_names_its_line_and_what_is_allowed)
{
    static const struct {
        const char *text, *says;
    } rows[] = {
        {"", "r.ini: [events] codes is missing"},
        {"[events]\ncodes = *\n", "[window] before is missing"},
        {"[events]\ncodes = *\n" WINDOW, "[signals] NAME = DERIVATION is missing"},
        {"[events]\ncodes = incison\n", "r.ini:2: codes = incison: no such code"},
        {"[events]\ncolour = red\n", "r.ini:2: colour = red: no such key; there are codes"},
        {"[events]\nstates = fine\n", "r.ini:2: states = fine: no such state"},
        {"[event]\ncodes = *\n", "r.ini:2: codes = *: stands in no known section"},
        {"[events]\nfirst = yes\nfirst = no\n", "r.ini:3: first = no: is given twice"},
        {"[events]\nfirst = maybe\n", "write yes or no"},
        {"[events]\nnot-within = -5..5 cautery\n", "r.ini:2: not-within"},
        {"[events]\nnot-within = 5..-5 of cautery\n", "from the smaller number up"},
        {"[window]\nbefore = soon\n", "r.ini:2: before = soon: write seconds"},
        {"[window]\nbefore = -3\n", "r.ini:2: before"},
        {"[window]\nrate = 0\n", "r.ini:2: rate = 0: write samples"},
        {"[window]\nvalid = 2\n", "write a share from 0 to 1"},
        {"[window]\nbaseline = -5\n", "r.ini:2: baseline"},
        {"[window]\nbaseline = -5..-1 often\n", "often"},
        {"[events]\ncodes = *\n" WINDOW "baseline = -40..-5\n" SIGNALS, "is not inside the window"},
        {"[events]\ncodes = *\n[window]\nbefore = 0\nafter = 0\nrate = 4\n" SIGNALS, "0 samples"},
        {"[signals]\nhr = mood\n", "r.ini:2: hr = mood: no such derivation; there are"},
        {"[signals]\nhr = heart-rate colour=1\n", "r.ini:2: hr:"},
        {"[signals]\nt_s = heart-rate\n", "r.ini:2: t_s = heart-rate: case, mark, code"},
        {"[signals]\nb = beats\n", "an event train"},
        {"[signals]\nx = channel\n", "needs a channel"},
        {"[signals]\nx = channel \"EDA\n", "a quote is opened"},
        {"[signals]\nx = channel EDA\n", "the channel in quotes"},
        {"[signals]\nhr = heart-rate\nhr = heart-rate\n", "r.ini:3: hr"},
        {"[signals]\n1hr = heart-rate\n", "begins with a letter"},
        {"nonsense\n", "r.ini:1: neither"},
        {"[events]\ncodes = \xB5\n", "not UTF-8"},
    };
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        struct recipe *recipe = NULL;
        struct err err = {0};
        cr_expect_neq(parse(rows[i].text, &recipe, &err), 0, "row %zu", i);
        cr_expect_null(recipe);
        cr_expect_not_null(strstr(err.text, rows[i].says), "row %zu: %s", i, err.text);
    }
}
