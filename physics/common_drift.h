/* Slow motion of the air that all droplets share (convection, a creeping camera), against time.
 * Not for a constant drift of one droplet, which its own fit holds.
 * A piecewise linear velocity, fitted to all droplets by least squares with each droplet's own constant velocity
 * kept apart, so that only what changes with time is seen: the mean is zero by construction. Applied
 * only where it is significant (p < 0.001); otherwise empty. */
#pragma once

#include <glib.h>
#include <stdbool.h>

typedef struct {
    GArray *fall_time_s, *fall_m_s;      /* double: knots, ascending, and velocities; empty: none */
    GArray *across_time_s, *across_m_s;  /* the same across gravity */
    double fall_p, across_p;             /* chance of as much variation from none */
    double fall_rms_m_s, across_rms_m_s; /* of what was found, 0 if not applied */
} RfCommonDrift;

/* One droplet's path along one axis, with all that its own fit explains taken off but for a constant speed. */
typedef struct {
    size_t n;
    const double *time_s, *place_m;  /* (borrowed) n */
    double diffusion_m2_s, noise_m2; /* of a position */
} RfDriftPath;

/* Fits knots of one axis.
 *   time_s, speed_m_s  emptied and filled; stay empty where the variation isn't significant
 *   p                  chance of as much from none
 *   returns            rms of the velocity found, 0 if none */
double rf_common_drift_fit(const RfDriftPath *paths, size_t n, GArray *time_s, GArray *speed_m_s, double *p);

RfCommonDrift *rf_common_drift_new(void);
void rf_common_drift_free(RfCommonDrift *drift);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfCommonDrift, rf_common_drift_free)

/* Displacement by the common drift from the first knot to a time, metres. NULL or empty: 0. */
double rf_common_drift_fall_m(const RfCommonDrift *drift, double time_s);
double rf_common_drift_across_m(const RfCommonDrift *drift, double time_s);
