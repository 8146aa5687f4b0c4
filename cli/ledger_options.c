#include "cli/ledger_options.h"

#include <string.h>

#include "cli/command.h"

static bool is_day(const char *option, const char *text, GError **error)
{
    if (!text || g_regex_match_simple("^\\d{4}(-\\d{2}(-\\d{2})?)?$", text, 0, 0)) return true;
    g_set_error(error, RF_COMMAND_ERROR, RF_COMMAND_ERROR_USAGE,
                "%s=%s: a day, month or year is needed, as in 2026-03-14", option, text);
    return false;
}

static bool are_pairs(const char *const *with, GError **error)
{
    for (int i = 0; with && with[i]; i++)
        if (!strchr(with[i], '=')) {
            g_set_error(error, RF_COMMAND_ERROR, RF_COMMAND_ERROR_USAGE,
                        "--with=%s: KEY=VALUE is needed, as in operator=A. Example", with[i]);
            return false;
        }
    return true;
}

bool rf_ledger_options_are_right(char **arguments, const RfLedgerFilter *filter, GError **error)
{
    if (arguments && arguments[0]) {
        g_set_error(error, RF_COMMAND_ERROR, RF_COMMAND_ERROR_USAGE,
                    "argument '%s': only options are taken here", arguments[0]);
        return false;
    }
    return is_day("--since", filter->since, error) && is_day("--until", filter->until, error) &&
           are_pairs(filter->with, error);
}

RfLedger *rf_ledger_options_open(GError **error)
{
    g_autofree char *place = rf_ledger_place(rf_command_common()->ledger);
    if (place) return rf_ledger_open_to_read(place, error);
    g_set_error(error, RF_COMMAND_ERROR, RF_COMMAND_ERROR_USAGE,
                "no ledger is kept, as RISEFALL_LEDGER or --ledger is empty; name one with --ledger FILE");
    return NULL;
}
