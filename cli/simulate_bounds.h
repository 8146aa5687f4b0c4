/* How well anyone could measure a synthetic droplet: Cramer-Rao bounds of radius and charges, and what a switch or a
 * charge step lets one know of its instant. Not for estimating anything: everything here is computed from the truth.
 *
 * A stretch of constant charge and field gives one velocity of variance (2 D T + 2 P)/T^2, P being the steady error of
 * a filtered position: P = (-Q + sqrt(Q^2 + 4 Q s^2))/2, Q = 2 D dt. It obeys v = v_g(a) + q V/(k(a) d): information
 * about one radius per droplet and one charge per spell. The spread adds information about the radius by D = k_B T/k(a):
 * Whittle's form of the Fisher information for increments of spectrum 2 D dt + beta (2 - 2 cos w),
 * beta = s^2 - 2 R D dt being unknown too (Berglund, Phys. Rev. E 82 (2010) 011917). */
#pragma once

#include "cli/simulate_record.h"

typedef struct { /* one spell of constant charge of one droplet */
    int units;
    double start_s, end_s, off_s, on_s;
    unsigned frames;
    double median_snr;
    double bound_charge_coulomb;       /* from velocities alone; negative: none, no field was seen */
    double bound_joint_charge_coulomb; /* the radius read from the spread too; negative: none */
} RfBoundSpell;

typedef struct {
    double bound_fall_m_s; /* of the field-off speed, from what was seen with the field off; negative: none */
    double radius_m;       /* at the middle */
    GArray *spells;        /* RfBoundSpell */
} RfDropletBounds;

/* (returns new) */
RfDropletBounds *rf_simulate_bounds_of(const RfRecord *record, const RfWorld *world,
                                       const RfTrueDroplet *droplet);
void rf_simulate_bounds_free(RfDropletBounds *bounds);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfDropletBounds, rf_simulate_bounds_free)

/* Square of (change of speed over noise of one increment), 1/s^2: the inverse variance of the instant of a change of
 * charge times voltage by `push_change` (coulomb volt) that this droplet, seen with error s_m, gives. */
double rf_simulate_bounds_instant_per_s2(const RfRecord *record, const RfWorld *world, double radius_m,
                                         double s_m, double push_change);

/* Information about ln D in one increment on one axis, the noise being unknown; between 0 and 1/2. */
double rf_simulate_bounds_spread_information(double diffusion_m2_s, double step_s, double blur, double s_m);
