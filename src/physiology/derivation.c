/*
 * derivation.c - the table of methods, and reading the parameters that a person typed for one.
 * Computes nothing: each method is a file of its own.
 */
#include "physiology/derivation.h"

#include <stdio.h>
#include <string.h>

#include "base/str.h"

/* One line a method: derivation_NAME is defined in the method's own file. */
#define METHODS(X) \
    X(channel)     \
    X(beats)       \
    X(heart_rate)

#define DECLARE(name) extern const struct derivation derivation_##name;
#define ENTER(name)   &derivation_##name,

METHODS(DECLARE)

const struct derivation *const derivations[] = {METHODS(ENTER) NULL};

const struct derivation *derivation_find(const char *name)
{
    for (size_t i = 0; derivations[i]; i++) {
        if (strcmp(derivations[i]->name, name) == 0)
            return derivations[i];
    }
    return NULL;
}

size_t derivation_parameter_count(const struct derivation *derivation)
{
    size_t count = 0;
    while (derivation->parameters && derivation->parameters[count].name)
        count++;
    return count;
}

/* Says which parameters there are. */
static int refuse_unknown(const struct derivation *derivation, const char *setting, int length,
                          struct err *err)
{
    size_t count = derivation_parameter_count(derivation);
    if (count == 0)
        return err_set(err, ERR_USAGE, "'%s': %s has no parameters", setting, derivation->name);
    char list[256] = "";
    size_t used = 0;
    for (size_t i = 0; i < count && used < sizeof list; i++) {
        int n = snprintf(list + used, sizeof list - used, "%s%s", i ? ", " : "",
                         derivation->parameters[i].name);
        used += n > 0 ? (size_t)n : 0;
    }
    return err_set(err, ERR_USAGE, "%s has no parameter '%.*s'; it has: %s", derivation->name,
                   length, setting, list);
}

/* The index of `text` in "raw|db|relative"; -1 when it is none of them. */
static int choice_find(const char *choices, const char *text)
{
    size_t length = strlen(text);
    for (int index = 0;; index++) {
        size_t word = strcspn(choices, "|");
        if (word == length && strncmp(choices, text, length) == 0)
            return index;
        if (choices[word] == '\0')
            return -1;
        choices += word + 1;
    }
}

static int parse_value(const struct derivation *derivation, const struct parameter *parameter,
                       const char *text, double *value, struct err *err)
{
    if (parameter->choices) {
        int index = choice_find(parameter->choices, text);
        if (index < 0)
            return err_set(err, ERR_USAGE, "parameter '%s' of %s must be one of %s, not '%s'",
                           parameter->name, derivation->name, parameter->choices, text);
        *value = index;
        return ERR_OK;
    }
    double number;
    bool good = number_parse(text, &number);
    if (!good || number < parameter->least || number > parameter->greatest)
        return err_set(err, ERR_USAGE, "parameter '%s' of %s must be %g..%g%s%s, not '%s'",
                       parameter->name, derivation->name, parameter->least, parameter->greatest,
                       parameter->unit[0] ? " " : "", parameter->unit, text);
    *value = number;
    return ERR_OK;
}

static int apply_setting(const struct derivation *derivation, const char *setting, double *values,
                         struct err *err)
{
    const char *equals = strchr(setting, '=');
    if (!equals)
        return err_set(err, ERR_USAGE, "'%s' is no setting of %s: write PARAMETER=VALUE", setting,
                       derivation->name);
    size_t length = (size_t)(equals - setting);
    size_t count = derivation_parameter_count(derivation);
    for (size_t i = 0; i < count; i++) {
        const struct parameter *parameter = &derivation->parameters[i];
        if (strlen(parameter->name) == length && strncmp(parameter->name, setting, length) == 0)
            return parse_value(derivation, parameter, equals + 1, &values[i], err);
    }
    return refuse_unknown(derivation, setting, (int)(length < 64 ? length : 64), err);
}

int derivation_parameters(const struct derivation *derivation, const char *const *settings,
                          size_t setting_count, double *values, struct err *err)
{
    size_t count = derivation_parameter_count(derivation);
    for (size_t i = 0; i < count; i++)
        values[i] = derivation->parameters[i].standard;
    for (size_t i = 0; i < setting_count; i++) {
        int failed = apply_setting(derivation, settings[i], values, err);
        if (failed)
            return failed;
    }
    return ERR_OK;
}

void derived_free(struct derived *derived)
{
    trace_free(derived->trace);
    derived->trace = NULL;
    train_free(&derived->train);
}
