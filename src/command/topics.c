/*
 * topics.c - the topics of `incisura help TOPIC`. Tables are printed from the code's own.
 */
#include <stdio.h>
#include <string.h>

#include "base/str.h"
#include "codebook/codebook.h"
#include "command/command_impl.h"
#include "physiology/derivation.h"
#include "recording/reader.h"
#include "terminal/actions.h"
#include "terminal/live.h"

static void print_times(FILE *to)
{
    (void)fputs("A time is written in one of these ways:\n"
                "  09:41:12.250           time of day; taken from 6 h before to 18 h after the\n"
                "                         case's start, so that a night case works\n"
                "  +00:34:07.5  +2047.5   from the case's start: the start of its first\n"
                "                         recording or live session, fixed once\n"
                "  2031-05-20T09:41:12    date and time on the theatre's wall clock\n"
                "  2031-05-20T07:41:12Z   the same in UTC, or with an offset: +02:00\n"
                "A span is written 10s, 250ms, 2min or 1h.\n",
                to);
}

static void print_formats(FILE *to)
{
    (void)fputs("Recordings are recognised by their first bytes or their name:\n", to);
    for (size_t i = 0; readers[i]; i++)
        (void)fprintf(to, "  %-8s %s\n", readers[i]->name, readers[i]->suffixes);
    (void)fputs("They are read in place and never written to.\n", to);
}

static void print_sources(FILE *to)
{
    (void)fputs(
        "A live source is written in one of these ways:\n"
        "  fifo:PATH             a named pipe\n"
        "  serial:DEVICE@BAUD    a serial line, 8N1: serial:/dev/ttyUSB0@115200\n"
        "  tcp:HOST:PORT         a connection out; the program never listens\n"
        "  -                     standard input\n"
        "  PATH                  a file that grows\n"
        "It sends lines or records, told apart by the first bytes:\n"
        "  lines    a header `t,ECG II [mV],EDA [uS]`, then rows of numbers; comma, semicolon or\n"
        "           tab; t is seconds (or a time) on the device's clock, and may be missing with\n"
        "           --rate HZ; an empty cell or NaN is a missing sample\n"
        "  records  an EDF, EDF+, BDF or BDF+ file from its first byte on, header first, the\n"
        "           number of records not known (-1)\n"
        "What comes is written as it comes, as CASE-live-1.bdf and so on beside the case:\n"
        "valid after any crash, flushed every two seconds. A lost connection is a gap, and is\n"
        "tried again; another header begins another file. The device's clock is fitted to the\n"
        "laptop's while it runs. On leaving, the files are attached to the case.\n",
        to);
}

static void print_roles(FILE *to)
{
    (void)fputs("A role says what a channel is; derivations ask for it. It comes from the label\n"
                "(`incisura inspect` says why) or from --role LABEL=ROLE, never from the samples.\n"
                "Roles:",
                to);
    for (int role = 0; role < ROLE_COUNT; role++)
        (void)fprintf(to, " %s", role_name((enum role)role));
    (void)fputc('\n', to);
}

static void print_codebook(FILE *to)
{
    (void)fputs("A codebook is a CSV table, one code a line, edited in a spreadsheet. Columns:\n"
                "  code        letters, digits, - and _; what exports carry\n"
                "  label       what people read; empty = the code\n"
                "  key         one letter, each used once; small and capital letters differ\n"
                "  kind        point, span, dose, rate, setting, note or sync\n"
                "  unit        UCUM, for doses, rates and settings: mg, ug/kg/min, mm[Hg]\n"
                "  class       group on the screen; drug classes have the colours of ISO 26825\n"
                "  pairs-with  a code that must follow this one\n"
                "  required    yes, when a case without it is incomplete\n"
                "  timer       yes: the live screen shows how long ago it was\n"
                "  least most  plausible values; the live screen asks once about others\n"
                "  help        one sentence\n"
                "A bad codebook is refused with its line and column. The default one:\n",
                to);
    (void)fwrite(default_codebook_text, 1, default_codebook_size, to);
}

static void print_parameter(FILE *to, const struct parameter *parameter)
{
    (void)fprintf(to, "    %s=", parameter->name);
    if (parameter->choices)
        (void)fprintf(to, "%s", parameter->choices);
    else
        (void)fprintf(to, "%g %s (%g to %g)", parameter->standard, parameter->unit,
                      parameter->least, parameter->greatest);
    (void)fprintf(to, "  %s\n", parameter->help);
}

/* "source: ..." wrapped under the name. */
static void print_field(FILE *to, const char *name, const char *text)
{
    struct str line = {0};
    str_putf(&line, "%s: %s", name, text);
    help_wrap(to, 4, str_text(&line));
    str_free(&line);
}

static void print_derivations(FILE *to)
{
    for (size_t i = 0; derivations[i]; i++) {
        const struct derivation *d = derivations[i];
        const char *from = d->needs_train         ? d->needs_train
                           : d->role == ROLE_NONE ? "any channel"
                                                  : role_name(d->role);
        (void)fprintf(to, "%s  %s from %s%s%s\n", d->name,
                      d->kind == DERIVES_TRACE ? "trace" : "event train", from,
                      d->unit ? ", in " : "", d->unit ? d->unit : "");
        help_wrap(to, 4, d->summary);
        print_field(to, "source", d->source);
        print_field(to, "edges", d->edges);
        for (size_t k = 0; d->parameters && d->parameters[k].name; k++)
            print_parameter(to, &d->parameters[k]);
    }
}

static void print_recipe(FILE *to)
{
    (void)fputs(
        "A recipe is an INI file that says which windows to export:\n\n"
        "  [events]\n"
        "  codes = incision, intubation     or * for all\n"
        "  [window]\n"
        "  before = 30\n"
        "  after = 60                       seconds\n"
        "  rate = 4                         samples a second in the tables\n"
        "  baseline = -30..-5               seconds from the mark\n"
        "  valid = 0.8                      least share of valid samples\n"
        "  [signals]\n"
        "  hr = heart-rate\n"
        "  skin = channel \"EDA\"             NAME = DERIVATION \"CHANNEL\" name=value ...\n",
        to);
}

static void print_keys(FILE *to)
{
    int group = -1;
    const char *key, *text;
    (void)fputs("Keys of the live screen\n", to);
    for (size_t i = 0; live_tool_key(i, &key, &text); i++)
        (void)fprintf(to, "  %-10s %s\n", key, text);
    (void)fputs("\nKeys of the review screen. Letters drop the marks of the case's codebook.\n",
                to);
    for (size_t i = 0; action_at(i); i++) {
        const struct action_entry *entry = action_at(i);
        if ((int)entry->group != group)
            (void)fprintf(to, "%s\n", action_group_heading(entry->group));
        group = (int)entry->group;
        (void)fprintf(to, "  %-6s %s\n", entry->shown, entry->help);
    }
}

const struct topic topics[] = {
    {"times", "how times and spans are written", print_times},
    {"formats", "recordings that can be read", print_formats},
    {"sources", "what streams into the live screen", print_sources},
    {"roles", "what a channel can be", print_roles},
    {"codebook", "the list of events, and the default one", print_codebook},
    {"derivations", "derived traces and event trains, with parameters and sources",
     print_derivations},
    {"keys", "keys of the live and the review screen", print_keys},
    {"recipe", "which windows to export", print_recipe},
    {NULL, NULL, NULL},
};
