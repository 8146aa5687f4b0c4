/* One droplet's radius, charges and noise from its path, by joint maximum likelihood over all field states.
 * Not for finding switches or steps (field_timeline.h, charge_step.h); both are taken as given.
 *
 * Model: along gravity the speed is v(V) = v_g(a) + q V/(k(a) d), across it a constant; diffusion D = k_B T/k(a) on
 * both axes (Stokes-Einstein, A. Einstein, Ann. Phys. 17 (1905) 549, with the slip of the same law); one free noise
 * parameter per axis. The radius is thus seen twice, in the fall and in the spread. Charges and the drift are
 * integrated out with flat priors (restricted likelihood), which keeps D unbiased in short paths. Sigma is from the
 * observed information; rf_droplet_fit_profile checks it. */
#pragma once

#include <stdbool.h>
#include <stddef.h>

#include "calib/units.h"
#include "physics/common_drift.h"
#include "physics/field_timeline.h"
#include "physics/medium.h"
#include "physics/path_likelihood.h"
#include "physics/trail.h"

enum { RF_DROPLET_SPELLS_MAX = 32, RF_DROPLET_SAMPLES_MIN = 12 };

typedef struct {
    const RfMedium *medium;          /* (borrowed) */
    const RfFieldTimeline *timeline; /* (borrowed) or NULL: no field ever */
    const RfCommonDrift *drift;      /* (borrowed) or NULL */
    const double *step_s; /* (borrowed) instants at which this droplet's charge changed, ascending */
    size_t steps;         /* < RF_DROPLET_SPELLS_MAX */
    RfNoiseMemory fall_memory, across_memory;
} RfDropletModel;

typedef enum {
    RF_FIT_DONE,
    RF_FIT_TOO_SHORT, /* fewer than RF_DROPLET_SAMPLES_MIN samples */
    RF_FIT_NO_MAXIMUM, /* likelihood without an inner maximum: not a falling Brownian sphere of 0.02 to 20 um */
} RfFitState;

const char *rf_droplet_fit_state_to_string(RfFitState state);

typedef struct {
    double start_s, end_s; /* first and last sample in it, cut by steps */
    size_t samples;
    double on_s;                          /* watched with a field on */
    bool has_charge;                      /* some field in it */
    RfValue charge_coulomb;               /* signed; sigma: random part */
    double covariance_with_next_coulomb2; /* of this charge with the next spell's */
    RfValue speed_per_volt_m_s_v;         /* sigma with the radius held */
    double fall_leak_per_v;               /* what speed_per_volt gains per fall speed assumed, 1/V */
    double
        evaporation_coulomb; /* what one sigma of the shrinkage taken off does to the charge; 0: none was */
} RfSpellFit;

typedef struct {
    RfFitState state; /* the rest holds only when done */
    RfValue radius_m, fall_m_s, across_m_s, diffusion_m2_s;
    RfValue fall_extra_variance_m2, across_extra_variance_m2;
    RfValue radius_fall_m;       /* from the speed alone; sigma 0: not seen (too uncertain, or not falling) */
    RfValue radius_spread_m;     /* from the diffusion alone; sigma 0: not seen */
    double spread_share;         /* of the radius' information, 0..1; the fall has the rest */
    double radius_agreement_p;   /* chance of a difference at least this large; 1 where either is not seen */
    double evaporation_radius_m; /* as evaporation_coulomb */
    double log_likelihood;
    size_t spells;
    RfSpellFit spell[RF_DROPLET_SPELLS_MAX];
} RfDropletFit;

/* Pure; safe from any thread with its own arguments. */
void rf_droplet_fit(const RfTrail *trail, const RfDropletModel *model, RfDropletFit *fit);

/* The interval in which the log-likelihood, maximised over all else, is within 1/2 of its top: 68 % for ln(radius). */
bool rf_droplet_fit_profile_radius(const RfTrail *trail, const RfDropletModel *model, const RfDropletFit *fit,
                                   double *low_m, double *high_m);
