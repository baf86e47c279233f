/*
 * cmd_help.c - `help`: the list, one command, one topic, or the whole as a man page. All of it is
 * printed from the tables that the program runs on, so that it cannot fall behind them.
 */
#include <stdio.h>
#include <string.h>

#include "base/version.h"
#include "command/command_impl.h"

enum { WIDTH = 80 };

static const char job[] =
    "Mark what happens in an operation over physiological recordings: stamp events, attach "
    "recordings, look at them, and export event-locked windows of raw and derived signals for "
    "statistics.";

static const char caution[] =
    "Research software: not a monitor, not a medical device, no dosing advice. Local policy, the "
    "ethics approval and the licensed clinicians in the room come first.";

void help_wrap(FILE *to, int indent, const char *text)
{
    int column = 0;
    while (*text) {
        if (*text == '\n') { /* a paragraph */
            (void)fputs(column > 0 ? "\n\n" : "\n", to);
            column = 0;
            text += strspn(text, "\n");
            continue;
        }
        int length = (int)strcspn(text, " \n");
        if (column > 0 && column + 1 + length > WIDTH - 1) {
            (void)fputc('\n', to);
            column = 0;
        }
        column += column == 0 ? fprintf(to, "%*s%.*s", indent, "", length, text)
                              : fprintf(to, " %.*s", length, text);
        text += length;
        while (*text == ' ')
            text++;
    }
    (void)fputc('\n', to);
}

static void print_option(FILE *to, const struct option_spec *option)
{
    char name[64];
    (void)snprintf(name, sizeof name, "--%s%s%s", option->name, option->value ? " " : "",
                   option->value ? option->value : "");
    (void)fprintf(to, "  %s%s\n", name, option->many ? "   (may be repeated)" : "");
    help_wrap(to, 6, option->help);
}

int help_command(const struct command *command, FILE *to)
{
    (void)fprintf(to, "incisura %s %s%s\n\n", command->name, command->args,
                  command->options ? " [--option ...]" : "");
    help_wrap(to, 0, command->summary);
    if (command->detail) {
        (void)fputc('\n', to);
        help_wrap(to, 0, command->detail);
    }
    if (command->options && command->options[0].name)
        (void)fputs("\noptions\n", to);
    for (size_t i = 0; command->options && command->options[i].name; i++)
        print_option(to, &command->options[i]);
    return EXIT_DONE;
}

static void print_list(FILE *to)
{
    (void)fprintf(to, "incisura %s\n\n", INCISURA_VERSION);
    help_wrap(to, 0, job);
    (void)fputs("\nincisura COMMAND CASE [ARG ...] [--option VALUE]\n\ncommands\n", to);
    for (size_t i = 0; commands[i]; i++)
        (void)fprintf(to, "  %-9s %s\n", commands[i]->name, commands[i]->summary);
    (void)fputs("\n`incisura help COMMAND` and `incisura help TOPIC` say more; topics\n", to);
    for (size_t i = 0; topics[i].name; i++)
        (void)fprintf(to, "  %-12s %s\n", topics[i].name, topics[i].summary);
    (void)fputs("\nexit status: 0 done, 1 found something wrong in the data, 2 could not do it\n\n",
                to);
    help_wrap(to, 0, caution);
}

/* Text as roff: a backslash, and a dot or quote that would begin a line, are made harmless. */
static void roff(FILE *to, const char *text)
{
    if (*text == '.' || *text == '\'')
        (void)fputs("\\&", to);
    for (; *text; text++) {
        if (*text == '\\')
            (void)fputs("\\e", to);
        else if (*text == '-')
            (void)fputs("\\-", to);
        else
            (void)fputc(*text, to);
    }
    (void)fputc('\n', to);
}

static void roff_command(FILE *to, const struct command *command)
{
    (void)fprintf(to, ".SS incisura %s %s\n", command->name, command->args);
    roff(to, command->summary);
    if (command->detail) {
        (void)fputs(".PP\n", to);
        roff(to, command->detail);
    }
    for (size_t i = 0; command->options && command->options[i].name; i++) {
        const struct option_spec *option = &command->options[i];
        (void)fprintf(to, ".TP\n.B \\-\\-%s %s\n", option->name,
                      option->value ? option->value : "");
        roff(to, option->help);
    }
}

static void print_man(FILE *to)
{
    (void)fprintf(to, ".TH INCISURA 1 \"\" \"incisura %s\" \"\"\n.SH NAME\n", INCISURA_VERSION);
    (void)fputs("incisura \\- marks of an operation over physiological recordings\n"
                ".SH SYNOPSIS\n.B incisura\n.I COMMAND CASE\n[\\fIARG\\fR ...] "
                "[\\fB\\-\\-option\\fR \\fIVALUE\\fR]\n.SH DESCRIPTION\n",
                to);
    roff(to, job);
    (void)fputs(".PP\n", to);
    roff(to, caution);
    (void)fputs(".SH COMMANDS\n", to);
    for (size_t i = 0; commands[i]; i++)
        roff_command(to, commands[i]);
    for (size_t i = 0; topics[i].name; i++) {
        (void)fprintf(to, ".SH %s\n.nf\n", topics[i].name);
        topics[i].print(to);
        (void)fputs(".fi\n", to);
    }
    (void)fputs(".SH EXIT STATUS\n0 done; 1 found something wrong in the data; 2 could not do "
                "it.\n",
                to);
}

static int run(const struct arguments *arguments)
{
    if (argument_flag(arguments, "man")) {
        print_man(stdout);
        return EXIT_DONE;
    }
    if (arguments->count == 0) {
        print_list(stdout);
        return EXIT_DONE;
    }
    const char *name = arguments->args[0];
    for (size_t i = 0; commands[i]; i++) {
        if (strcmp(commands[i]->name, name) == 0)
            return help_command(commands[i], stdout);
    }
    for (size_t i = 0; topics[i].name; i++) {
        if (strcmp(topics[i].name, name) == 0) {
            topics[i].print(stdout);
            return EXIT_DONE;
        }
    }
    struct err err = {0};
    (void)err_set(&err, ERR_NOT_FOUND, "no command or topic '%s'; `incisura help` lists them",
                  name);
    return command_fail(arguments, &err);
}

static const struct option_spec options[] = {
    {"man", NULL, false, "print the whole as a man page (roff)"},
    {0},
};

const struct command command_help = {
    .name = "help",
    .args = "[COMMAND|TOPIC]",
    .least = 0,
    .most = 1,
    .summary = "what the commands and topics are",
    .options = options,
    .run = run,
};
