/* What commands that read the ledger ask of their command line. */
#pragma once

#include "cli/ledger.h"

/* No argument beside the options, days that are days, KEY=VALUE with its sign; else RF_COMMAND_ERROR_USAGE. */
bool rf_ledger_options_are_right(char **arguments, const RfLedgerFilter *filter, GError **error);

/* The ledger of --ledger or its usual place, to read. Where none is kept: RF_COMMAND_ERROR_USAGE. (returns new) */
RfLedger *rf_ledger_options_open(GError **error);
