/*
 * test_physiology_derivation.c - the table of methods: complete entries, parameters as typed, and
 * the one method that computes nothing.
 */
#include <criterion/criterion.h>

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/ns.h"
#include "physiology/derivation.h"

/* The entries are the documentation: none may say less than the reader of a table needs. */
Test(physiology, every_entry_documents_itself)
{
    for (size_t i = 0; derivations[i]; i++) {
        const struct derivation *entry = derivations[i];
        cr_expect_eq(derivation_find(entry->name), entry);
        cr_expect(entry->summary && strlen(entry->summary) > 10, "%s", entry->name);
        cr_expect(entry->source && strlen(entry->source) > 3, "%s", entry->name);
        cr_expect(entry->edges && strlen(entry->edges) > 20, "%s", entry->name);
        cr_expect(entry->version && entry->version[0], "%s", entry->name);
        cr_expect_not_null(entry->compute);
        cr_expect(!entry->needs_train || derivation_find(entry->needs_train));
        for (size_t p = 0; p < derivation_parameter_count(entry); p++) {
            const struct parameter *parameter = &entry->parameters[p];
            cr_expect(parameter->help && parameter->help[0] && parameter->unit);
            cr_expect(parameter->least <= parameter->standard &&
                          parameter->standard <= parameter->greatest,
                      "%s %s", entry->name, parameter->name);
        }
    }
    cr_expect_null(derivation_find("no-such-method"));
}

static const struct parameter some_parameters[] = {
    {"rate", "Hz", 4, 0.1, 100, NULL, "samples a second"},
    {"scale", "", 1, 0, 2, "raw|db|relative", "of the result"},
    {0},
};
static const struct derivation some_method = {.name = "some", .parameters = some_parameters};

Test(physiology, parameters_take_defaults_numbers_and_choices)
{
    double values[2];
    struct err err = {0};
    cr_assert_eq(derivation_parameters(&some_method, NULL, 0, values, &err), 0);
    cr_expect(values[0] == 4 && values[1] == 1);
    static const char *const settings[] = {"rate=0.5", "scale=relative", "rate=100"};
    cr_assert_eq(derivation_parameters(&some_method, settings, 3, values, &err), 0, "%s", err.text);
    cr_expect(values[0] == 100 && values[1] == 2, "the last one counts");
}

Test(physiology, bad_parameters_are_refused_with_what_is_allowed)
{
    static const struct {
        const char *setting, *said;
    } rows[] = {
        {"rate=abc", "parameter 'rate' of some must be 0.1..100 Hz, not 'abc'"},
        {"rate=0.05", "parameter 'rate' of some must be 0.1..100 Hz, not '0.05'"},
        {"rate=", "parameter 'rate' of some must be 0.1..100 Hz, not ''"},
        {"rate=nan", "parameter 'rate' of some must be 0.1..100 Hz, not 'nan'"},
        {"scale=log", "parameter 'scale' of some must be one of raw|db|relative, not 'log'"},
        {"scale=raw|db", "parameter 'scale' of some must be one of raw|db|relative, not 'raw|db'"},
        {"scale=", "parameter 'scale' of some must be one of raw|db|relative, not ''"},
        {"rat=1", "some has no parameter 'rat'; it has: rate, scale"},
        {"rates=1", "some has no parameter 'rates'; it has: rate, scale"},
        {"rate", "'rate' is no setting of some: write PARAMETER=VALUE"},
    };
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        double values[2];
        struct err err = {0};
        cr_expect_eq(derivation_parameters(&some_method, &rows[i].setting, 1, values, &err),
                     ERR_USAGE, "%s", rows[i].setting);
        cr_expect_str_eq(err.text, rows[i].said);
    }
    static const char *const setting = "gain=2";
    struct err err = {0};
    cr_expect_eq(derivation_parameters(derivation_find("channel"), &setting, 1, NULL, &err),
                 ERR_USAGE);
    cr_expect_str_eq(err.text, "'gain=2': channel has no parameters");
}

Test(physiology, channel_hands_the_samples_through)
{
    float *samples = malloc(5 * sizeof *samples);
    cr_assert_not_null(samples);
    for (int i = 0; i < 5; i++)
        samples[i] = i == 2 ? NAN : (float)i * 0.5f;
    const struct run runs[] = {{NS_PER_S, NS_PER_S, 0, 2}, {5 * NS_PER_S, 3 * NS_PER_S, 2, 3}};
    struct trace *raw = NULL;
    struct err err = {0};
    cr_assert_eq(memory_trace_new("ECG II", "mV", runs, 2, samples, 0, &raw, &err), 0);
    const struct trace *const channels[] = {raw};
    struct derive_input input = {.channels = channels, .channel_count = 1, .threads = 1};
    struct derived out = {0};
    const struct derivation *channel = derivation_find("channel");
    cr_assert_eq(channel->compute(&input, &out, &err), 0, "%s", err.text);
    float got[5], low, high;
    cr_assert_eq(trace_read(out.trace, 0, 5, got, &err), 0);
    cr_expect(got[1] == 0.5f && isnan(got[2]) && got[4] == 2);
    cr_assert_eq(trace_minmax(out.trace, 1, 4, &low, &high, &err), 0);
    cr_expect(low == 0.5f && high == 2);
    cr_expect_str_eq(out.trace->unit, "mV");
    cr_expect_eq(trace_time_ns(out.trace, 3), 6 * NS_PER_S);
    cr_expect_eq(out.trace->reach_ns, 0);
    cr_expect_neq(trace_read(out.trace, 3, 3, got, &err), 0, "past the end");
    derived_free(&out);
    trace_free(raw);
    input.channel_count = 0;
    cr_expect_eq(channel->compute(&input, &out, &err), ERR_USAGE);
}
