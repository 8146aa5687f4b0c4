/* What to expect of a droplet before recording it: speeds, time in view, and the least uncertainty of charge and radius
 * that any estimator can reach (Cramer-Rao), with and without reading the radius from the spread of the path too.
 * Not for recorded paths.
 *
 * Model: positions every 1/frame_rate, drift plus Brownian steps plus white localisation noise of unknown size; one off
 * and one on stretch. Increments of a stretch have variance 2 D dt + 2 w and covariance -w beside it, w = s^2 - 2 R D dt
 * unknown (Berglund, Phys. Rev. E 82 (2010) 011917), eigenvalues 2 D dt + 2 w (1 - cos(k pi/(N+1))). A long exposure
 * makes w smaller, so it helps a little. */
#pragma once

#include <stdbool.h>

#include "physics/medium.h"

typedef struct {
    double off_s, on_s;    /* time watched in either state, > 0, at least 4 frames each */
    double voltage_V;      /* while on; not 0 */
    double frame_rate_hz;  /* > 0 */
    double localisation_m; /* standard uncertainty of one position, per axis, > 0 */
    double
        blur; /* R, unitless: exposure over frame interval over 6; 0 for a flash, 1/6 for an open shutter */
    double view_m; /* height of the field of view */
} RfObservation;

typedef struct {
    double fall_off_m_s, fall_on_m_s; /* positive downward */
    double diffusion_m2_s;
    double in_view_off_s, in_view_on_s; /* to cross the view once; at most 1e6 s */
    double u_fall_off_m_s;              /* bound on v_g from the off stretch */
    double u_charge_fall_coulomb;       /* radius from the fall only */
    double u_charge_joint_coulomb;      /* radius from fall and spread */
    double u_radius_fall_m, u_radius_joint_m;
    double spread_share; /* of the information on the radius: 1 - (u_joint/u_fall)^2 */
} RfExpectation;

/* radius_m > 0; charge of any sign. Pure. */
RfExpectation rf_expectation_find(const RfMedium *medium, const RfObservation *watch, double radius_m,
                                  double charge_coulomb);

/* The voltage that holds a droplet still (signed: negative for a positive charge), V. charge not 0. */
double rf_expectation_balance_voltage_V(const RfMedium *medium, double radius_m, double charge_coulomb);
