/* The few counts and choices that summary, report and JSON must agree on. Not for physics: it only reads. */
#pragma once

#include "cli/results.h"

/* Spells of constant charge, and the droplets they belong to. A droplet is accepted when one of its spells is. */
typedef struct {
    unsigned spells, spells_accepted;
    unsigned droplets, droplets_accepted;
} RfTally;
RfTally rf_tally_droplets(const RfResults *results);

/* The line of the budget that adds most to the charge's uncertainty; NULL without a budget. (borrowed) */
const RfBudgetRow *rf_tally_limiting_input(const RfResults *results);

const char *rf_tally_field_to_string(RfFieldState field); /* off, top+, top- */
const char *rf_tally_recording_to_string(RfRecordingState state); /* pooled, silent, empty, failed */
/* Recordings of a pool in that state. */
unsigned rf_tally_recordings(const RfResults *results, RfRecordingState state);
