#include "cli/ledger_keep.h"

#include <inttypes.h>
#include <stdio.h>

#include "cli/command.h"
#include "cli/ledger.h"

void rf_ledger_keep(RfLedgerEntry *entry)
{
    const RfCommonOptions *common = rf_command_common();
    g_autofree char *place = rf_ledger_place(common->ledger);
    if (!place) return;
    g_autoptr(GError) error = NULL;
    g_autoptr(RfLedger) ledger = rf_ledger_open(place, &error);
    if (!ledger || !rf_ledger_enter(ledger, entry, &error))
        fprintf(stderr, "risefall: note: not entered in the ledger: %s\n", error->message);
}
