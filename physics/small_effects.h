/* Effects on a droplet that are left out of the physics because they are small: their size, so that a report can say so
 * with a number. Not corrections: nothing here is applied. All unitless shares unless a unit is named. Pure. */
#pragma once

#include "physics/medium.h"

/* Extra drag near one plate at distance_m from the droplet's centre, motion towards or from it: 9/8 a/h (Lorentz 1907,
 * first order; parallel motion has half of it). h = 0.2 mm and a = 1 um: 0.6 %; in mid-gap of 6 mm, two plates: 0.08 %. */
double rf_small_effects_plate_drag(double radius_m, double distance_m);

/* Oseen's inertial part of the drag, (3/16) Re, Re = 2 a v rho/eta. Below 1e-4 for droplets under 2 um at 0.3 mm/s. */
double rf_small_effects_inertial_drag(const RfMedium *medium, double radius_m, double speed_m_s);

/* Time to reach a new terminal velocity (to 1/e), m/k, seconds; about 3 us at 0.5 um. Over it, times a change of speed, a
 * switch of the field moves the droplet by nanometres. */
double rf_small_effects_settling_time_s(const RfMedium *medium, double radius_m);

/* Pull of the droplet's image charges in both plates against its weight at distance_m from the nearer plate:
 * q^2/(16 pi eps0 h^2) over 4/3 pi a^3 w; 3e-5 for 10 e at 0.2 mm and 0.5 um. */
double rf_small_effects_image_charge(const RfMedium *medium, double radius_m, double charge_coulomb,
                                     double distance_m);
