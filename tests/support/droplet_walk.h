/* Paths of droplets whose every number is known, for the tests and the benchmark of the estimator: fall, field,
 * Brownian motion in steps finer than a frame, exposure, localisation noise with or without memory. */
#pragma once

#include <gsl/gsl_rng.h>

#include "physics/droplet_fit.h"

extern const RfMedium WALK_MEDIUM; /* air of 23 degC, oil of 886 kg/m^3, 6 mm between the plates */

typedef struct {
    const RfMedium *medium;
    const RfFieldTimeline *timeline; /* or NULL */
    double radius_m, charge_coulomb;
    double start_s, end_s, frame_s;
    double exposure;     /* as a share of the frame, 0..1 */
    double noise_m;      /* of a position */
    double noise_memory; /* correlation of neighbouring errors, 0: white */
    double across_m_s;
    double step_s, charge_after_coulomb; /* charge changes at step_s; step_s <= start_s: never */
    double jump_at_s, jump_m;            /* the position jumps; jump_m 0: never */
    double missing;                      /* share of frames without a sample */
} Walk;

/* (returns new) samples are g_malloc'd: free with walk_trail_clear. */
RfTrail walk_trail_new(const Walk *walk, unsigned droplet, gsl_rng *random);
void walk_trail_clear(RfTrail *trail);

/* off and the other state by turns, beginning with off; n switches at the times given. */
RfFieldTimeline *walk_timeline_new(const double *switch_s, size_t n, RfFieldState on, double voltage_v,
                                   double end_s);
