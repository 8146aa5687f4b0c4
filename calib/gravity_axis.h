/* Which way gravity points in the picture, from the motion itself: droplets in one interval share the air's motion, so differences
 * between them, and between field states of one droplet, lie along gravity (and field). Not for finding intervals or
 * velocities. Pure; safe from any thread.
 *
 * Model: velocity of a leg = a g + c_k + noise; a free in every leg, g the unit vector of fall, c_k the air's motion in
 * interval k, its part across gravity N(c0, tau^2). The angle minimises the generalised sum of squares of what is left
 * across g (errors in both coordinates), tau^2 by restricted maximum likelihood. */
#pragma once

#include <stdbool.h>
#include <stddef.h>

#include "calib/units.h"

typedef struct {
    unsigned droplet;
    unsigned
        interval; /* number of the stretch between two field switches: droplets in it share the air's motion */
    bool is_off;  /* no field */
    int state;    /* any number that differs between field states */
    double vx, vy;               /* square pixels per second, or m/s: any unit, the same in all legs */
    double var_x, var_y, cov_xy; /* covariance of (vx, vy), the same unit squared */
} RfMotionLeg;

typedef struct {
    RfValue
        gravity_rad; /* direction of fall, from the picture's +y towards its -x; sigma includes scatter beyond the noise */
    bool
        is_found; /* false: the motion can't tell (too few legs, or all alike); gravity_rad is the nominal with sigma 0 */
    RfValue tilt_rad;    /* field axis less gravity axis; sigma 0: can't be told */
    double tilt_p;       /* chance of a tilt this large when both are parallel; 1 if it can't be told */
    double air_sigma;    /* tau: how the air's motion across gravity varies from interval to interval */
    double chi2_per_dof; /* of what is left across gravity */
    size_t legs;         /* used */
} RfGravityAxis;

/* `nominal_rad` as rf_picture_frame_direction_rad gives it; the answer lies within 30 degrees of it. */
RfGravityAxis rf_gravity_axis_refine(const RfMotionLeg *legs, size_t n, double nominal_rad);

/* For a sheet that says gravity=find: the mean motion of the legs without field points down, which holds when the air moves
 * more slowly than the droplets fall; then refined as above. is_found is false when that mean is within 3 sigma of none. */
RfGravityAxis rf_gravity_axis_find(const RfMotionLeg *legs, size_t n);
