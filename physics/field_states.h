/* Which state each run is in. A droplet's speed is v_g + w V with the state's voltage V, so two numbers per droplet
 * explain all its runs; a third state follows from two. A change of charge draws a new w at a price, a tracking
 * mistake costs the same; hence one droplet can't vote a switch into being against the others. Labels are found by a
 * beam search over sequences in which states first occur in the sheet's order, the levels of a state in any. With a
 * medium the recording may also start without field, or with it, against the sheet, at a price: the fall without field goes
 * with the wander. */
#pragma once

#include "physics/field_runs.h"
#include "physics/field_timeline.h"

typedef struct {
    double fall_m_s, speed_per_volt_m_s_v; /* as the best labels see the droplet, at its last charge */
    double u_speed_per_volt_m_s_v;
} RfStateDroplet;

/* What the supply may be at: a state, at one of its voltages. */
typedef struct {
    RfFieldState state;
    unsigned order; /* in which the state first occurs, from 0; levels of one state have the same */
    double voltage_v;
} RfFieldLevel;

enum { RF_FIELD_LEVELS = 8 };

/* levels: n_levels <= RF_FIELD_LEVELS; medium may be NULL.
 * label: runs, index into levels; doubt: runs, chance that a run has another label, from the likelihoods of all
 * readings; droplet: as many as in runs. All filled. */
void rf_field_states_label(const RfFieldRuns *runs, const RfFieldLevel *levels, size_t n_levels,
                           const RfMedium *medium, unsigned *label, double *doubt, RfStateDroplet *droplet);
