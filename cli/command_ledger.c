#include <stdio.h>

#include "cli/command.h"
#include "cli/ledger_options.h"
#include "cli/ledger_text.h"

static char *kind, *since, *until, *input, *export_to;
static char **with;
static int number;

static const GOptionEntry entries[] = {
    {"show", 0, 0, G_OPTION_ARG_INT, &number, "everything about one entry", "NUMBER"},
    {"kind", 0, 0, G_OPTION_ARG_STRING, &kind, "only these", "run|audit|pool"},
    {"since", 0, 0, G_OPTION_ARG_STRING, &since, "measured on that day or later, as in 2026-03-14", "DATE"},
    {"until", 0, 0, G_OPTION_ARG_STRING, &until, "measured on that day or before", "DATE"},
    {"input", 0, 0, G_OPTION_ARG_STRING, &input, "made from that file: end of its path, or its SHA-256",
     "FILE"},
    {"with", 0, 0, G_OPTION_ARG_STRING_ARRAY, &with, "with that setting or note; several may be given",
     "KEY=VALUE"},
    {"export", 0, 0, G_OPTION_ARG_FILENAME, &export_to, "write them there: a table (.csv), or all (.json)",
     "FILE"},
    {0},
};

static RfLedgerFilter filter(void)
{
    return (RfLedgerFilter){kind, since, until, input, (const char *const *)with};
}

static bool are_options_right(char **arguments, GError **error)
{
    const RfLedgerFilter wanted = filter();
    if (!rf_ledger_options_are_right(arguments, &wanted, error)) return false;
    if (kind && !g_strv_contains((const char *const[]){"run", "audit", "pool", NULL}, kind)) {
        g_set_error(error, RF_COMMAND_ERROR, RF_COMMAND_ERROR_USAGE,
                    "--kind=%s: run, audit or pool is needed", kind);
        return false;
    }
    if (export_to && !g_str_has_suffix(export_to, ".csv") && !g_str_has_suffix(export_to, ".json")) {
        g_set_error(error, RF_COMMAND_ERROR, RF_COMMAND_ERROR_USAGE,
                    "--export=%s: a name that ends in .csv or .json is needed", export_to);
        return false;
    }
    return true;
}

/* An export of JSON holds whole entries: those of a list have their notes only. */
static GPtrArray *read_whole(RfLedger *ledger, const GPtrArray *listed, GError **error)
{
    g_autoptr(GPtrArray) whole = g_ptr_array_new_with_free_func((GDestroyNotify)rf_ledger_entry_free);
    for (guint i = 0; i < listed->len; i++) {
        RfLedgerEntry *entry =
            rf_ledger_read(ledger, ((const RfLedgerEntry *)listed->pdata[i])->number, error);
        if (!entry) return NULL;
        g_ptr_array_add(whole, entry);
    }
    return g_steal_pointer(&whole);
}

static char *as_json(RfLedger *ledger, const GPtrArray *listed, GError **error)
{
    g_autoptr(GPtrArray) whole = read_whole(ledger, listed, error);
    return whole ? rf_ledger_text_json(whole) : NULL;
}

static RfExit list(RfLedger *ledger, GError **error)
{
    const RfLedgerFilter wanted = filter();
    g_autoptr(GPtrArray) found = rf_ledger_list(ledger, &wanted, error);
    if (!found) return RF_EXIT_INPUT;
    const bool is_json = export_to ? g_str_has_suffix(export_to, ".json") : rf_command_common()->as_json;
    g_autofree char *text = is_json ? as_json(ledger, found, error)
                                    : (export_to ? rf_ledger_text_csv(found) : rf_ledger_text_list(found));
    if (!text) return RF_EXIT_INPUT;
    if (!export_to) {
        fputs(text, stdout);
        return RF_EXIT_DONE;
    }
    if (!g_file_set_contents(export_to, text, -1, error)) return RF_EXIT_INPUT;
    if (!rf_command_common()->is_quiet) printf("%u entries in %s\n", found->len, export_to);
    return RF_EXIT_DONE;
}

static RfExit show(RfLedger *ledger, GError **error)
{
    g_autoptr(RfLedgerEntry) entry = rf_ledger_read(ledger, number, error);
    if (!entry) return RF_EXIT_INPUT;
    g_autoptr(GPtrArray) one = g_ptr_array_new();
    g_ptr_array_add(one, entry);
    g_autofree char *text =
        rf_command_common()->as_json ? rf_ledger_text_json(one) : rf_ledger_text_entry(entry);
    fputs(text, stdout);
    return RF_EXIT_DONE;
}

static RfExit run(char **arguments, GError **error)
{
    if (!are_options_right(arguments, error)) return RF_EXIT_USAGE;
    g_autoptr(RfLedger) ledger = rf_ledger_options_open(error);
    if (!ledger) return RF_EXIT_INPUT;
    return number ? show(ledger, error) : list(ledger, error);
}

const RfCommand rf_command_ledger = {
    .verb = "ledger",
    .arguments = "[FILTERS] [--show NUMBER | --export FILE]",
    .purpose = "what has been measured so far: list, filter, show, export",
    .details = "Every run, audit and pool is entered in a ledger, an SQLite file: the files that went in "
               "with their SHA-256, every "
               "setting, the program's version, the figures that came out, warnings and findings. --ledger "
               "FILE names one, else "
               "the variable RISEFALL_LEDGER, else it is risefall/ledger.sqlite in your data folder; an "
               "empty name keeps none.\n\n"
               "A recording belongs to the day that the sheet's note date= gives, as in date=2026-03-14; "
               "without one, to the day on "
               "which it was entered.",
    .example = "  risefall ledger --since 2026-03 --with bench=A\n"
               "lists the runs since March whose sheets say bench=A in their notes",
    .entries = entries,
    .has_json = true,
    .has_ledger = true,
    .run = run,
};
