/*
 * role.c - roles from labels: EDF+ standard texts and common spellings (common practice). Looks at
 * words, never at samples.
 */
#include "recording/role.h"

#include <ctype.h>
#include <stdio.h>
#include <string.h>

#include "base/str.h"

static const char *const names[ROLE_COUNT] = {
    [ROLE_NONE] = "none", [ROLE_ECG] = "ecg",   [ROLE_ABP] = "abp",     [ROLE_PLETH] = "pleth",
    [ROLE_RESP] = "resp", [ROLE_CO2] = "co2",   [ROLE_EDA] = "eda",     [ROLE_EEG] = "eeg",
    [ROLE_EMG] = "emg",   [ROLE_TEMP] = "temp", [ROLE_TREND] = "trend", [ROLE_STATUS] = "status",
};

const char *role_name(enum role role)
{
    return (unsigned)role < ROLE_COUNT ? names[role] : names[ROLE_NONE];
}

bool role_from_name(const char *name, enum role *out)
{
    for (int role = 0; role < ROLE_COUNT; role++) {
        if (ascii_equal(name, names[role])) {
            *out = (enum role)role;
            return true;
        }
    }
    return false;
}

enum match {
    WORD,      /* one of the label's words, in any letter case */
    FIRST,     /* the label's first word */
    WHOLE,     /* the label and nothing else */
    EXACT,     /* the same, in capitals as lead names are written */
    ELECTRODE, /* first word is a place on the head, and the unit a voltage or nothing */
};

/* Asked in order: numerics before the waves whose names they contain. */
static const struct {
    const char *text;
    enum match match;
    enum role role;
} rules[] = {
    {"etco2 wave", WHOLE, ROLE_CO2},
    {"pleth", WORD, ROLE_PLETH},
    {"rate", WORD, ROLE_TREND},
    {"hr", WORD, ROLE_TREND},
    {"map", WORD, ROLE_TREND},
    {"bpm", WORD, ROLE_TREND},
    {"spo2", FIRST, ROLE_TREND},
    {"status", WORD, ROLE_STATUS},
    {"trigger", WORD, ROLE_STATUS},
    {"sys", WORD, ROLE_TREND},
    {"dia", WORD, ROLE_TREND},
    {"mean", WORD, ROLE_TREND},
    {"systolic", WORD, ROLE_TREND},
    {"diastolic", WORD, ROLE_TREND},
    {"pr", WHOLE, ROLE_TREND},
    {"rr", WHOLE, ROLE_TREND},
    {"nibp", FIRST, ROLE_TREND},
    {"nbp", FIRST, ROLE_TREND},
    {"sao2", FIRST, ROLE_TREND},
    {"etco2", WHOLE, ROLE_TREND},
    {"ecg", FIRST, ROLE_ECG},
    {"ekg", FIRST, ROLE_ECG},
    {"I", EXACT, ROLE_ECG},
    {"II", EXACT, ROLE_ECG},
    {"III", EXACT, ROLE_ECG},
    {"avr", WHOLE, ROLE_ECG},
    {"avl", WHOLE, ROLE_ECG},
    {"avf", WHOLE, ROLE_ECG},
    {"mli", WHOLE, ROLE_ECG},
    {"mlii", WHOLE, ROLE_ECG},
    {"mliii", WHOLE, ROLE_ECG},
    {"mcl1", WHOLE, ROLE_ECG},
    {"V1", EXACT, ROLE_ECG},
    {"V2", EXACT, ROLE_ECG},
    {"V3", EXACT, ROLE_ECG},
    {"V4", EXACT, ROLE_ECG},
    {"V5", EXACT, ROLE_ECG},
    {"V6", EXACT, ROLE_ECG},
    {"abp", FIRST, ROLE_ABP},
    {"art", FIRST, ROLE_ABP},
    {"ibp", FIRST, ROLE_ABP},
    {"arterial", FIRST, ROLE_ABP},
    {"ppg", FIRST, ROLE_PLETH},
    {"co2", FIRST, ROLE_CO2},
    {"capno", FIRST, ROLE_CO2},
    {"capnogram", FIRST, ROLE_CO2},
    {"resp", FIRST, ROLE_RESP},
    {"respiration", FIRST, ROLE_RESP},
    {"airway", FIRST, ROLE_RESP},
    {"awp", FIRST, ROLE_RESP},
    {"paw", FIRST, ROLE_RESP},
    {"flow", FIRST, ROLE_RESP},
    {"eda", FIRST, ROLE_EDA},
    {"gsr", FIRST, ROLE_EDA},
    {"scl", FIRST, ROLE_EDA},
    {"scr", FIRST, ROLE_EDA},
    {"skin conductance", FIRST, ROLE_EDA},
    {"eeg", WORD, ROLE_EEG},
    {"fp1", ELECTRODE, ROLE_EEG},
    {"fp2", ELECTRODE, ROLE_EEG},
    {"fpz", ELECTRODE, ROLE_EEG},
    {"f7", ELECTRODE, ROLE_EEG},
    {"f3", ELECTRODE, ROLE_EEG},
    {"fz", ELECTRODE, ROLE_EEG},
    {"f4", ELECTRODE, ROLE_EEG},
    {"f8", ELECTRODE, ROLE_EEG},
    {"af7", ELECTRODE, ROLE_EEG},
    {"af8", ELECTRODE, ROLE_EEG},
    {"c3", ELECTRODE, ROLE_EEG},
    {"cz", ELECTRODE, ROLE_EEG},
    {"c4", ELECTRODE, ROLE_EEG},
    {"p3", ELECTRODE, ROLE_EEG},
    {"pz", ELECTRODE, ROLE_EEG},
    {"p4", ELECTRODE, ROLE_EEG},
    {"o1", ELECTRODE, ROLE_EEG},
    {"oz", ELECTRODE, ROLE_EEG},
    {"o2", ELECTRODE, ROLE_EEG},
    {"t7", ELECTRODE, ROLE_EEG},
    {"t8", ELECTRODE, ROLE_EEG},
    {"t3", ELECTRODE, ROLE_EEG},
    {"t4", ELECTRODE, ROLE_EEG},
    {"t5", ELECTRODE, ROLE_EEG},
    {"t6", ELECTRODE, ROLE_EEG},
    {"emg", FIRST, ROLE_EMG},
    {"temp", FIRST, ROLE_TEMP},
    {"temperature", FIRST, ROLE_TEMP},
};

/* Is `word` (lower case) at `at`, with no letter or digit on either side? A digit may follow a
 * word that ends in a letter: "ECG1". */
static bool word_at(const char *label, size_t at, const char *word)
{
    size_t length = strlen(word);
    if (!ascii_starts(label + at, word) || (at > 0 && isalnum((unsigned char)label[at - 1])))
        return false;
    unsigned char next = (unsigned char)label[at + length];
    bool digit_may_follow = isalpha((unsigned char)word[length - 1]) && length >= 3;
    return !isalpha(next) && (!isdigit(next) || digit_may_follow);
}

/* Letters after a prefix: "uV", "mV", micro in either of its two code points. */
static bool is_voltage(const char *unit)
{
    size_t length = strlen(unit);
    return length == 0 || (unit[length - 1] == 'V' && length <= 3);
}

static bool is_microsiemens(const char *unit)
{
    return strcmp(unit, "uS") == 0 || strcmp(unit, "\xC2\xB5S") == 0 ||
           strcmp(unit, "\xCE\xBCS") == 0;
}

static bool matches(const char *label, const char *unit, const char *text, enum match match)
{
    if (match == ELECTRODE)
        return word_at(label, 0, text) && is_voltage(unit);
    if (match == EXACT)
        return strcmp(label, text) == 0;
    if (match == WHOLE)
        return ascii_equal(label, text);
    if (match == FIRST)
        return word_at(label, 0, text);
    for (size_t at = 0; label[at]; at++) {
        if (word_at(label, at, text))
            return true;
    }
    return false;
}

enum role role_of_label(const char *label, const char *unit, char *why, size_t why_size)
{
    static const char *const how[] = {"label has the word", "label begins with", "label is",
                                      "label is lead", "label begins with the electrode"};
    for (size_t i = 0; i < sizeof rules / sizeof *rules; i++) {
        if (!matches(label, unit, rules[i].text, rules[i].match))
            continue;
        (void)snprintf(why, why_size, "%s \"%s\"", how[rules[i].match], rules[i].text);
        return rules[i].role;
    }
    /* Micro-siemens is the one unit that nothing but skin conductance is recorded in here. */
    if (is_microsiemens(unit)) {
        (void)snprintf(why, why_size, "unit is microsiemens");
        return ROLE_EDA;
    }
    (void)snprintf(why, why_size, "label says nothing known; set it with --role");
    return ROLE_NONE;
}
