/* The ledger: an SQLite file in which each run, audit and pool is entered whole or not at all. Several programs may write at
 * once (each waits for the others up to half a minute); a ledger of an older format is brought up to date when it is next written
 * to; a damaged or foreign file is reported and never touched. The one file that knows SQLite. Not for what an entry holds:
 * ledger_entry.h. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "cli/ledger_entry.h"

typedef enum {
    RF_LEDGER_ERROR_MISSING, /* no such ledger, and it was to be read */
    RF_LEDGER_ERROR_FOREIGN, /* no ledger, or one of a newer program */
    RF_LEDGER_ERROR_DAMAGED,
    RF_LEDGER_ERROR_WRITE,  /* read-only, full, locked for too long */
    RF_LEDGER_ERROR_NUMBER, /* no such entry */
} RfLedgerError;
#define RF_LEDGER_ERROR (rf_ledger_error_quark())
GQuark rf_ledger_error_quark(void);

typedef struct RfLedger RfLedger;

/* Where the ledger is: `option` if given, else $RISEFALL_LEDGER, else risefall/ledger.sqlite in the user's data folder. NULL:
 * none is kept, because the variable is set and empty. (returns new) */
char *rf_ledger_place(const char *option);

/* To enter into: made, with its folder, where it doesn't exist yet. Checks the whole file first. */
RfLedger *rf_ledger_open(const char *path, GError **error);
/* To read: an older format is understood without being changed. */
RfLedger *rf_ledger_open_to_read(const char *path, GError **error);
void rf_ledger_close(RfLedger *ledger);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfLedger, rf_ledger_close)

/* Whole or not at all; entry->number is set. */
bool rf_ledger_enter(RfLedger *ledger, RfLedgerEntry *entry, GError **error);

/* NULL members don't filter. Dates compare as text: "2026-03" is any day of that March. */
typedef struct {
    const char *kind;
    const char *since, *until; /* of measured_on, both included */
    const char *input;         /* the beginning of a SHA-256, or the end of a path */
    const char *const *with;   /* "KEY=VALUE" of a setting or note, all of them; ends with NULL */
} RfLedgerFilter;

/* RfLedgerEntry in the order of measured_on, then number, with inputs, figures and [notes] but no other settings and no remarks.
 * (returns new) */
GPtrArray *rf_ledger_list(RfLedger *ledger, const RfLedgerFilter *filter, GError **error);
/* One entry with everything. (returns new) */
RfLedgerEntry *rf_ledger_read(RfLedger *ledger, gint64 number, GError **error);
