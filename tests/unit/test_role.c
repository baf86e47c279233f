/*
 * test_role.c - roles of labels as they are met (common practice), and of those that only look so.
 */
#include <criterion/criterion.h>

#include "recording/role.h"

Test(role, of_labels)
{
    static const struct {
        const char *label, *unit;
        enum role role;
    } rows[] = {
        {"ECG II", "mV", ROLE_ECG},
        {"EKG", "uV", ROLE_ECG},
        {"ECG1", "", ROLE_ECG},
        {"MLII", "mV", ROLE_ECG},
        {"V5", "mV", ROLE_ECG},
        {"aVR", "mV", ROLE_ECG},
        {"ABP", "mmHg", ROLE_ABP},
        {"ART", "mm[Hg]", ROLE_ABP},
        {"PLETH", "%", ROLE_PLETH},
        {"SpO2 Pleth", "", ROLE_PLETH},
        {"RESP", "Ohm", ROLE_RESP},
        {"Airway pressure", "", ROLE_RESP},
        {"CO2", "mm[Hg]", ROLE_CO2},
        {"EtCO2 wave", "", ROLE_CO2},
        {"EDA", "uS", ROLE_EDA},
        {"Channel 7", "\xC2\xB5S", ROLE_EDA},
        {"Skin conductance left", "", ROLE_EDA},
        {"EEG Fpz-Cz", "uV", ROLE_EEG},
        {"Fp1-F7", "uV", ROLE_EEG},
        {"BIS EEG", "uV", ROLE_EEG},
        {"EMG chin", "uV", ROLE_EMG},
        {"Temp rectal", "degC", ROLE_TEMP},
        {"BDF Status", "", ROLE_STATUS},
        {"HR", "/min", ROLE_TREND},
        {"ECG HR", "/min", ROLE_TREND},
        {"ABP mean", "mmHg", ROLE_TREND},
        {"Resp rate", "/min", ROLE_TREND},
        {"SpO2", "%", ROLE_TREND},
        {"NIBP sys", "mmHg", ROLE_TREND},
        /* only alike */
        {"O2", "%", ROLE_NONE},
        {"P3", "mmHg", ROLE_NONE},
        {"v", "", ROLE_NONE},
        {"x", "us", ROLE_NONE},
        {"Artefact", "", ROLE_NONE},
        {"Eclipse", "", ROLE_NONE},
        {"", "", ROLE_NONE},
    };
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        char why[160] = "";
        enum role role = role_of_label(rows[i].label, rows[i].unit, why, sizeof why);
        cr_expect_eq(role, rows[i].role, "'%s' [%s] is %s: %s", rows[i].label, rows[i].unit,
                     role_name(role), why);
        cr_expect_neq(why[0], '\0', "always a reason");
    }
}

Test(role, names_go_both_ways)
{
    for (int i = 0; i < ROLE_COUNT; i++) {
        enum role role;
        cr_expect(role_from_name(role_name((enum role)i), &role) && role == (enum role)i);
    }
    enum role role;
    cr_expect_not(role_from_name("mood", &role));
}
