/* What the ledger keeps of one run, audit or pool: what went in, how it was set, what came out. Filled from results; not for
 * storing (ledger.h) nor for the tables of the result folder, which stays where it is. */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stdint.h>

#include "cli/results.h"

typedef struct {   /* one number worth following over months; the unit ends its name */
    char *name;    /* unit_charge_C, scale_px_mm, noise_px, drift_mm_s, temperature_degC, timing_bias_s ... */
    RfValue value; /* sigma 0: not stated */
} RfLedgerFigure;

typedef struct {
    char *kind; /* warning, finding, review */
    char *text;
} RfLedgerRemark;

typedef struct {
    int64_t number; /* 0: not entered yet */
    char *kind;     /* run, audit, pool */
    char *entered;  /* UTC, 2026-03-14T09:26:53Z */
    char *
        measured_on; /* the sheet's date= where it begins as ISO 8601 wants, 2026-03-14; else the day of `entered` */
    char *version; /* of the program */
    char *sheet;   /* absolute path; NULL where there is none */
    char *folder;  /* of the results, absolute; NULL: none were written */
    bool measured;
    char *verdict;
    GArray *inputs;   /* RfInputFile */
    GArray *settings; /* RfUsedSetting, those of [notes] among them */
    GArray *figures;  /* RfLedgerFigure */
    GArray *remarks;  /* RfLedgerRemark */
} RfLedgerEntry;

/* Empty but for kind, instant and version. (returns new) */
RfLedgerEntry *rf_ledger_entry_new(const char *kind);
/* Of a run or an audit; `folder` may be NULL. (returns new) */
RfLedgerEntry *rf_ledger_entry_from_results(const char *kind, const RfResults *results, const char *folder);

void rf_ledger_entry_add_input(RfLedgerEntry *entry, const char *role, const char *path, const char *sha256);
void rf_ledger_entry_add_setting(RfLedgerEntry *entry, const char *group, const char *key, const char *value,
                                 bool is_default);
void rf_ledger_entry_add_figure(RfLedgerEntry *entry, const char *name, RfValue value);
void rf_ledger_entry_add_remark(RfLedgerEntry *entry, const char *kind, const char *text);

/* NULL where there is none. (borrowed) */
const RfLedgerFigure *rf_ledger_entry_figure(const RfLedgerEntry *entry, const char *name);
const char *rf_ledger_entry_note(const RfLedgerEntry *entry, const char *key);

void rf_ledger_entry_free(RfLedgerEntry *entry);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfLedgerEntry, rf_ledger_entry_free)
