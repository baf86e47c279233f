/*
 * role.h - what a channel is physiologically: the word that derivations ask for.
 *
 * Decided from the label (EDF+ standard texts and common spellings) and, where the label says
 * nothing, from nothing: a role is never guessed from the samples. role_of_label() also says why,
 * in words that `inspect` shows.
 */
#ifndef RECORDING_ROLE_H
#define RECORDING_ROLE_H

#include <stdbool.h>
#include <stddef.h>

enum role {
    ROLE_NONE, /* not known: still shown, marked and exported */
    ROLE_ECG,
    ROLE_ABP,   /* invasive arterial pressure, a wave */
    ROLE_PLETH, /* photoplethysmogram */
    ROLE_RESP,  /* breathing: impedance, belt, airway flow or pressure */
    ROLE_CO2,
    ROLE_EDA, /* skin conductance */
    ROLE_EEG,
    ROLE_EMG,
    ROLE_TEMP,
    ROLE_TREND,  /* a monitor's numeric: one value a second or slower */
    ROLE_STATUS, /* trigger and status words: not a signal to plot */
    ROLE_COUNT
};

/* "ecg", "abp", ...; "none" for ROLE_NONE. */
const char *role_name(enum role role);
bool role_from_name(const char *name, enum role *out);

/* `unit` may be empty. Writes one clause to `why`: "label begins with ECG (EDF+ standard text)". */
enum role role_of_label(const char *label, const char *unit, char *why, size_t why_size);

#endif
