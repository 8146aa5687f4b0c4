/* Entering what a command has done, as its last act: results stand whatever becomes of the ledger, so trouble with it is told
 * and nothing more. */
#pragma once

#include "cli/ledger_entry.h"

/* Into the ledger of --ledger or its usual place. What went wrong is on stderr, with "note:". */
void rf_ledger_keep(RfLedgerEntry *entry);
