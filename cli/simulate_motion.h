/* How a synthetic droplet moves: settling, field, drift of the air, Brownian motion, all three exact over any step
 * (a Gaussian increment with the right mean and variance), so the step length is a matter of the picture alone.
 * Relaxation to terminal velocity (microseconds) is left out. Not for where it appears in the picture
 * (simulate_view.h). */
#pragma once

#include <glib.h>
#include <gsl/gsl_rng.h>

#include "cli/simulate_world.h"

typedef struct {
    double fall_m, drift_m, depth_m; /* depth: along the line of sight, 0 in the plane of focus */
} RfPlace;

typedef struct {
    RfPlace place;
    double birth_s;
    double radius_m;         /* at birth */
    double brightness;       /* peak in focus, grey levels of 255 */
    double evaporation_m2_s; /* radius^2 falls by this each second */
    double depth_range_m;    /* walls that reflect it; 0: depth stays */
    GArray *spells;          /* RfSpell, the first at -infinity */
} RfBody;

/* (returns new) The body takes its own copy of `spells`. */
RfBody *rf_simulate_motion_body_new(double birth_s, double radius_m, double brightness, const GArray *spells);
void rf_simulate_motion_body_free(RfBody *body);

int rf_simulate_motion_units_at(const RfBody *body, double time_s);
double rf_simulate_motion_radius_m(const RfBody *body, double time_s); /* never below 50 nm */

/* Mean of charge times voltage over the step, in coulomb volt: exact through switches and charge steps. */
double rf_simulate_motion_mean_push(const RfBody *body, const RfWorld *world, double from_s, double to_s);

/* Adds one step to body->place. `random` gives three Gaussian numbers, always. */
void rf_simulate_motion_advance(RfBody *body, const RfWorld *world, double from_s, double to_s,
                                gsl_rng *random);

/* Adds charge steps of one or two units at random instants while the field is on, steps_hz per second of field. */
void rf_simulate_motion_add_steps(RfBody *body, const RfWorld *world, double steps_hz, double end_s,
                                  gsl_rng *random);
