#include "cli/manual.h"

#include <string.h>

static void clear_part(RfManualPart *part)
{
    g_free(part->term);
    g_free(part->text);
}

RfManual *rf_manual_new(const char *name, const char *called, int section, const char *purpose)
{
    RfManual *manual = g_new0(RfManual, 1);
    *manual = (RfManual){g_strdup(name), g_strdup(called), section, g_strdup(purpose),
                         g_array_new(FALSE, FALSE, sizeof(RfManualPart))};
    g_array_set_clear_func(manual->parts, (GDestroyNotify)clear_part);
    return manual;
}

void rf_manual_free(RfManual *manual)
{
    if (!manual) return;
    g_free(manual->name);
    g_free(manual->called);
    g_free(manual->purpose);
    g_array_unref(manual->parts);
    g_free(manual);
}

void rf_manual_add(RfManual *manual, RfManualKind kind, const char *term, const char *text)
{
    const RfManualPart part = {kind, g_strdup(term), g_strdup(text)};
    g_array_append_val(manual->parts, part);
}

void rf_manual_add_paragraphs(RfManual *manual, const char *text)
{
    g_auto(GStrv) paragraphs = g_strsplit(text, "\n\n", -1);
    for (char **paragraph = paragraphs; *paragraph; paragraph++)
        rf_manual_add(manual, RF_MANUAL_PARAGRAPH, NULL, *paragraph);
}

static void heading(RfManual *manual, const char *text)
{
    rf_manual_add(manual, RF_MANUAL_HEADING, NULL, text);
}

static void item(RfManual *manual, const char *term, const char *text)
{
    rf_manual_add(manual, RF_MANUAL_ITEM, term, text);
}

/* ---- parts of a command's page ---- */

static void add_option(RfManual *manual, const GOptionEntry *option)
{
    g_autoptr(GString) term = g_string_new(NULL);
    if (option->short_name) g_string_append_printf(term, "-%c, ", option->short_name);
    g_string_append_printf(term, "--%s", option->long_name);
    if (option->arg_description) g_string_append_printf(term, "=%s", option->arg_description);
    item(manual, term->str, option->description);
}

static void add_options(RfManual *manual, const GOptionEntry *options)
{
    for (; options->long_name; options++)
        if (!(options->flags & G_OPTION_FLAG_HIDDEN)) add_option(manual, options);
    item(manual, "-h, --help", "how the command is called, with an example");
}

RfManual *rf_manual_options(const RfCommand *command)
{
    RfManual *manual = rf_manual_new(command->verb, command->verb, 1, command->purpose);
    g_autofree GOptionEntry *options = rf_command_options(command);
    add_options(manual, options);
    return manual;
}

/* The lines indented by two are the command; what follows tells what it does. */
static void add_example(RfManual *manual, const char *example)
{
    g_auto(GStrv) lines = g_strsplit(example, "\n", -1);
    g_autoptr(GString) command = g_string_new(NULL), rest = g_string_new(NULL);
    for (char **line = lines; *line; line++) {
        const bool is_command = g_str_has_prefix(*line, "  ");
        g_string_append_printf(is_command ? command : rest, "%s\n", is_command ? *line + 2 : *line);
    }
    heading(manual, "Example");
    rf_manual_add(manual, RF_MANUAL_VERBATIM, NULL, command->str);
    if (*rest->str) rf_manual_add(manual, RF_MANUAL_PARAGRAPH, NULL, rest->str);
}

static void add_statuses(RfManual *manual)
{
    heading(manual, "Exit status");
    item(manual, "0", "done");
    item(manual, "1",
         "bad input: a file, a sheet or a recording; the message says what was seen, what was needed and "
         "where");
    item(manual, "2", "called in a way that doesn't exist: command, option or argument");
    item(manual, "3", "ran, but nothing could be measured; summary and report say why");
}

static void add_files(RfManual *manual, const RfCommandFile *files)
{
    heading(manual, "Files left behind");
    for (; files->name; files++) item(manual, files->name, files->what);
}

RfManual *rf_manual_command(const RfCommand *command)
{
    g_autofree char *name = g_strdup_printf("risefall-%s", command->verb),
                    *called = g_strdup_printf("risefall %s", command->verb),
                    *synopsis = g_strdup_printf("%s [OPTION...] %s\n", called, command->arguments);
    RfManual *manual = rf_manual_new(name, called, 1, command->purpose);
    heading(manual, "Synopsis");
    rf_manual_add(manual, RF_MANUAL_VERBATIM, NULL, synopsis);
    if (command->details) {
        heading(manual, "Description");
        rf_manual_add_paragraphs(manual, command->details);
    }
    g_autofree GOptionEntry *options = rf_command_options(command);
    heading(manual, "Options");
    add_options(manual, options);
    if (command->files) add_files(manual, command->files);
    add_statuses(manual);
    add_example(manual, command->example);
    heading(manual, "See also");
    rf_manual_add(manual, RF_MANUAL_PARAGRAPH, NULL, "risefall(1), risefall-sheet(5)");
    return manual;
}

/* ---- the program's own page ---- */

static void add_commands(RfManual *manual)
{
    heading(manual, "Commands");
    for (const RfCommand *const *command = rf_commands; *command; command++)
        item(manual, (*command)->verb, (*command)->purpose);
    item(manual, "help [COMMAND|sheet]",
         "a page of this manual on the terminal; 'sheet' lists what a run sheet may hold");
}

static void add_environment(RfManual *manual)
{
    heading(manual, "Environment");
    item(manual, "NO_COLOR",
         "set to anything but nothing: no colour on the terminal. Colour never tells what no word tells");
    item(manual, "PAGER", "the program that 'risefall help' shows long pages with; less where it isn't set");
}

RfManual *rf_manual_overview(void)
{
    RfManual *manual = rf_manual_new("risefall", "risefall", 1,
                                     "charges of droplets from recordings of a droplet charge cell");
    heading(manual, "Synopsis");
    rf_manual_add(manual, RF_MANUAL_VERBATIM, NULL, "risefall COMMAND [OPTION...] ARGUMENT...\n");
    heading(manual, "Description");
    rf_manual_add_paragraphs(
        manual,
        "Charged oil droplets fall between two horizontal plates and rise when the plates are at high "
        "voltage; from the "
        "two speeds follow each droplet's radius and charge. risefall takes the video of the viewing scope "
        "and a short "
        "run sheet, and gives back every droplet's path, radius and charge with its uncertainty, the unit of "
        "charge "
        "where these droplets can give one, and a verdict on hand timings made of the same recording.\n\n"
        "Results go to files, a summary to standard output, everything else to standard error. A result "
        "folder appears "
        "whole or not at all; an earlier result in its place is replaced, anything else there is not. The "
        "same input "
        "gives the same bytes, with any number of threads.");
    add_commands(manual);
    add_statuses(manual);
    add_environment(manual);
    heading(manual, "Example");
    rf_manual_add(manual, RF_MANUAL_VERBATIM, NULL,
                  "risefall check morning.mkv\n"
                  "risefall calibrate morning.ini --picture lines.png\n"
                  "risefall run morning.ini --out morning\n");
    heading(manual, "Cautions");
    rf_manual_add_paragraphs(manual, "The plates carry high voltage on bare metal, the ionising source is a "
                                     "radiation source or an X-ray tube, and "
                                     "oil mist is neither to be breathed nor lit. Follow your local rules "
                                     "and the people licensed to decide; discharge "
                                     "the plates before touching anything. Nothing in this program or its "
                                     "reports says that a set-up is safe.");
    heading(manual, "See also");
    g_autoptr(GString) others = g_string_new("risefall-sheet(5)");
    for (const RfCommand *const *command = rf_commands; *command; command++)
        g_string_append_printf(others, ", risefall-%s(1)", (*command)->verb);
    rf_manual_add(manual, RF_MANUAL_PARAGRAPH, NULL, others->str);
    return manual;
}
