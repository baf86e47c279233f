/*
 * test_codebook.c - codebooks, units of UCUM, drug classes of ISO 26825.
 */
#include <criterion/criterion.h>

#include <string.h>

#include "codebook/codebook.h"
#include "codebook/drug_class.h"
#include "codebook/unit.h"

static int parse(const char *text, struct codebook **out, struct err *err)
{
    return codebook_parse(text, strlen(text), "book.csv", out, err);
}

Test(codebook, the_default_one)
{
    struct codebook *book = NULL;
    struct err err = {0};
    cr_assert_eq(
        codebook_parse(default_codebook_text, default_codebook_size, "default", &book, &err), 0,
        "%s", err.text);
    cr_expect_geq(codebook_count(book), 45);
    const struct code *incision = codebook_find(book, "incision");
    cr_assert_not_null(incision);
    cr_expect(incision->kind == CODE_POINT && incision->required);
    cr_expect_eq(codebook_by_key(book, incision->key), incision);
    cr_assert_not_null(codebook_find(book, "intubation"));
    const struct code *propofol = codebook_find(book, "propofol");
    cr_expect_str_eq(propofol->unit, "mg");
    cr_expect_str_eq(drug_class_find(propofol->class_name)->colour, "yellow");
    cr_expect_null(codebook_find(book, "Incision"));
    cr_expect_null(codebook_by_key(book, '7'));
    codebook_free(book);
}

Test(codebook, spreadsheets_as_they_come)
{
    struct codebook *book = NULL;
    struct err err = {0};
    cr_assert_eq(parse("\xEF\xBB\xBF"
                       "Key;Code;Kind;Unit;remarks\r\n"
                       "p;drug-1;DOSE;mcg/kg/min;\"odd; but fine\"\r\n\xC3\xA4;cut;point;;\r\n",
                       &book, &err),
                 0, "%s", err.text);
    cr_expect_str_eq(codebook_at(book, 0)->unit, "ug/kg/min");
    cr_expect_str_eq(codebook_at(book, 0)->label, "drug-1");
    cr_expect_eq(codebook_by_key(book, 0xE4), codebook_at(book, 1));
    cr_expect_null(codebook_at(book, 2));
    codebook_free(book);
}

Test(codebook, a_bad_one_is_refused_with_line_and_column)
{
    static const struct {
        const char *text, *says;
    } rows[] = {
        {"", "book.csv: empty"},
        {"code,key,kind\n", "book.csv: names columns and no code"},
        {"code,kind\na,point\n", "book.csv:1: no column 'key'"},
        {"code,key,kind\na,x,point\nb,x,point\n",
         "book.csv:3: column 'key': 'x' is the key of 'a' already"},
        {"code,key,kind\na,x,event\n", "book.csv:2: column 'kind': 'event' is not a kind"},
        {"code,key,kind\na,,point\n", "book.csv:2: column 'key': '' is empty"},
        {"code,key,kind\na,xy,point\n", "book.csv:2: column 'key': 'xy' is not a key"},
        {"code,key,kind\na,7,point\n", "book.csv:2: column 'key': '7' is not a key"},
        {"code,key,kind\na b,x,point\n", "book.csv:2: column 'code'"},
        {"code,key,kind\na,x,point\nA,y,point\n", "book.csv:3: column 'code': 'A' is used twice"},
        {"code,key,kind,unit\na,x,dose,\n", "book.csv:2: column 'unit': '' is empty"},
        {"code,key,kind,unit\na,x,dose,spoons\n", "book.csv:2: column 'unit': 'spoons'"},
        {"code,key,kind,pairs-with\na,x,point,b\n", "book.csv:2: column 'pairs-with': 'b'"},
        {"code,key,kind,required\na,x,point,maybe\n", "book.csv:2: column 'required'"},
        {"code,key,kind\na,x,\"point\n", "book.csv:2: a quote"},
        {"code,key,kind,help\na,x,point,cut, then more\n", "book.csv:2: column 5: a field past"},
        {"code,key,kind,unit\na,x,dose,m/m/m/m/m/m/m/m/m/m/m/m/m/m/m/m/m/m/m/m/m/m/m/m/m/m/m/m/m/m/"
         "m/m/"
         "spoons\n",
         "book.csv:2: column 'unit': 'm/m"},
        {"code,key,kind\n\"a\nb\",x,point\n", "book.csv:3: column 'code': 'a' is not a code"},
    };
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        struct codebook *book = NULL;
        struct err err = {0};
        cr_expect_neq(parse(rows[i].text, &book, &err), 0, "row %zu", i);
        cr_expect_null(book);
        cr_expect_eq(strncmp(err.text, rows[i].says, strlen(rows[i].says)), 0, "row %zu: %s", i,
                     err.text);
        cr_expect_null(strchr(err.text, '\n'), "row %zu: one line", i);
    }
}

/* Codes of the UCUM specification (case-sensitive column) as theatre records use them. */
Test(units, of_ucum)
{
    static const char *const good[] = {
        "mg",    "ug",     "ng",   "kg",    "mL",        "l",         "mmol",        "meq",
        "U",     "[iU]",   "[IU]", "mg/kg", "ug/kg/min", "mL/h",      "L/min",       "[iU]/h",
        "ug/mL", "mmol/L", "%",    "[ppm]", "mm[Hg]",    "cm[H2O]",   "kPa",         "mbar",
        "Cel",   "/min",   "Hz",   "uV",    "uS",        "kOhm",      "{beats}/min", "{MAC}",
        "[drp]", "1",      "m2",   "s-1",   "mg.kg-1",   "(mg/kg)/h",
    };
    static const char *const bad[] = {"",       "spoons",  "mcg",       "mmHg", "mg/", "/",
                                      "mg//kg", "m g",     "[Hg",       "{a",   "(mg", "mg)",
                                      "kmin",   "ml/kg*h", "\xC2\xB5g", "mg kg"};
    for (size_t i = 0; i < sizeof good / sizeof *good; i++)
        cr_expect(unit_valid(good[i]), "'%s'", good[i]);
    for (size_t i = 0; i < sizeof bad / sizeof *bad; i++)
        cr_expect_not(unit_valid(bad[i]), "'%s'", bad[i]);
}

Test(units, spellings_become_codes)
{
    static const char *const rows[][2] = {
        {"mmHg", "mm[Hg]"},
        {"mcg/kg/min", "ug/kg/min"},
        {"\xC2\xB5g", "ug"},
        {"IU/h", "[iU]/h"},
        {"\xC2\xB0"
         "C",
         "Cel"},
        {"bpm", "/min"},
        {"mg", "mg"},
        {"spoons", "spoons"},
        {"", ""},
    };
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        char out[64];
        unit_normalise(rows[i][0], out, sizeof out);
        cr_expect_str_eq(out, rows[i][1]);
    }
    char small[4];
    unit_normalise("ug/kg/min", small, sizeof small);
    cr_expect_lt(strlen(small), sizeof small);
}

/* ISO 26825:2020, user-applied labels: the colour of each class. */
Test(drug_classes, of_iso_26825)
{
    static const char *const rows[][2] = {
        {"induction", "yellow"},      {"benzodiazepine", "orange"}, {"relaxant", "red"},
        {"opioid", "blue"},           {"vasopressor", "violet"},    {"local-anaesthetic", "grey"},
        {"anticholinergic", "green"}, {"anti-emetic", "salmon"},
    };
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        const struct drug_class *class = drug_class_find(rows[i][0]);
        cr_assert_not_null(class, "%s", rows[i][0]);
        cr_expect_str_eq(class->colour, rows[i][1]);
        cr_expect_not(class->striped);
    }
    cr_expect(drug_class_find("opioid-antagonist")->striped, "an antagonist's label is striped");
    cr_expect_null(drug_class_find("surgery"));
    size_t count = 0;
    while (drug_class_at(count))
        count++;
    cr_expect_leq(count, 20, "the theme has room for them all");
}
