/* Which state each run is in. A droplet's speed is v_g + w V with the state's voltage V, so two numbers per droplet
 * explain all its runs; a third state follows from two. A change of charge draws a new w at a price, a tracking
 * mistake costs the same; hence one droplet can't vote a switch into being against the others. Labels are found by a
 * beam search over sequences in which states first occur in the sheet's order. */
#pragma once

#include "physics/field_runs.h"
#include "physics/field_timeline.h"

typedef struct {
    double fall_m_s, speed_per_volt_m_s_v; /* as the best labels see the droplet, at its last charge */
    double u_speed_per_volt_m_s_v;
} RfStateDroplet;

/* label: runs, index into sheet->state; doubt: runs, chance that a run has another label, from the likelihoods of all
 * readings; droplet: as many as in runs. All filled. */
void rf_field_states_label(const RfFieldRuns *runs, const RfFieldSheet *sheet, const double *voltage_v,
                           unsigned *label, double *doubt, RfStateDroplet *droplet);
