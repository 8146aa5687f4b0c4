#include "cli/help.h"

#include "cli/likeness.h"
#include "cli/manual.h"
#include "cli/pager.h"
#include "cli/text_wrap.h"

#include <unistd.h>

void rf_help_overview(FILE *to)
{
    fputs("usage: risefall COMMAND [OPTIONS]\n\n"
          "From a recording of a droplet charge cell to charges with their uncertainty.\n\n",
          to);
    for (const RfCommand *const *command = rf_commands; *command; command++)
        fprintf(to, "  %-10s %s\n", (*command)->verb, (*command)->purpose);
    fputs("\n'risefall COMMAND --help' shows options with an example, 'risefall help COMMAND'\n"
          "tells all, 'risefall help sheet' lists what a run sheet may hold.\n"
          "'risefall --version' names the version.\n",
          to);
}

void rf_help_command(const RfCommand *command)
{
    g_autoptr(RfManual) options = rf_manual_options(command);
    g_autofree char *title = g_strdup_printf("usage: risefall %s [OPTION...] %s", command->verb,
                                             command->arguments),
                    *list = rf_manual_parts_text(options, 80);
    printf("%s\n\n%s\n\n%s\nExample:\n%s\n", title, command->purpose, list, command->example);
}

static RfManual *page_of(const char *topic)
{
    if (g_str_equal(topic, "sheet")) return rf_manual_sheet();
    if (g_str_equal(topic, "risefall")) return rf_manual_overview();
    const RfCommand *command = rf_command_find(topic);
    return command ? rf_manual_command(command) : NULL;
}

RfExit rf_help_no_such(const char *kind, const char *word)
{
    g_autoptr(GPtrArray) known = g_ptr_array_new();
    for (const RfCommand *const *command = rf_commands; *command; command++)
        g_ptr_array_add(known, (char *)(*command)->verb);
    g_ptr_array_add(known, "help");
    g_ptr_array_add(known, "sheet");
    const char *like = rf_likeness_nearest(word, (const char *const *)known->pdata, known->len);
    fprintf(stderr, "risefall: no %s '%s'", kind, word);
    if (like) fprintf(stderr, "; did you mean '%s'?", like);
    fputs("\n'risefall --help' lists the commands\n", stderr);
    return RF_EXIT_USAGE;
}

RfExit rf_help_topic(const char *topic, int n_topics)
{
    if (!topic || g_str_equal(topic, "--help") || g_str_equal(topic, "-h")) {
        rf_help_overview(stdout);
        return RF_EXIT_DONE;
    }
    if (n_topics > 1) {
        fprintf(stderr, "risefall: help takes one command, or sheet; %d words given\n", n_topics);
        return RF_EXIT_USAGE;
    }
    g_autoptr(RfManual) page = page_of(topic);
    if (!page) return rf_help_no_such("help on", topic);
    g_autofree char *text = rf_manual_text(page, rf_text_wrap_terminal_columns(STDOUT_FILENO));
    rf_pager_show(text);
    return RF_EXIT_DONE;
}
