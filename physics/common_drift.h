/* Slow motion of the air that all droplets share (convection, a creeping camera), against time.
 * Not for a constant drift of one droplet, which its own fit holds.
 * A piecewise linear velocity, fitted to all droplets by generalised least squares with each droplet's own velocity
 * per field state kept apart, so that only what changes with time is seen: the mean is zero by construction. Applied
 * only where it is significant (p < 0.001); otherwise empty. */
#pragma once

#include <glib.h>
#include <stdbool.h>

typedef struct {
    GArray *time_s;                      /* double, ascending; empty: no common drift */
    GArray *fall_m_s;                    /* double, beside it */
    GArray *across_m_s;                  /* double, beside it */
    double fall_p, across_p;             /* chance of as much variation from none */
    double fall_rms_m_s, across_rms_m_s; /* of what was found, 0 if not applied */
} RfCommonDrift;

RfCommonDrift *rf_common_drift_new(void);
void rf_common_drift_free(RfCommonDrift *drift);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfCommonDrift, rf_common_drift_free)

/* Displacement by the common drift from the first knot to a time, metres. NULL or empty: 0. */
double rf_common_drift_fall_m(const RfCommonDrift *drift, double time_s);
double rf_common_drift_across_m(const RfCommonDrift *drift, double time_s);
