/* The ledger as people and scripts read it: a list on the screen, one entry in full, a table or JSON of many. Text only. */
#pragma once

#include <glib.h>

#include "cli/ledger_entry.h"

/* One line an entry, under a head. (returns new) */
char *rf_ledger_text_list(const GPtrArray *entries);
/* Everything about one. (returns new) */
char *rf_ledger_text_entry(const RfLedgerEntry *entry);
/* One row an entry; after the fixed columns NAME and u_NAME of every figure that occurs, by name. (returns new) */
char *rf_ledger_text_csv(const GPtrArray *entries);
/* An array of entries with what was read of them. (returns new) */
char *rf_ledger_text_json(const GPtrArray *entries);
