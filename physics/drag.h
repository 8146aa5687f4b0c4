/* Drag on a small sphere in still air: F = k v with k = 6 pi eta a/Cc (Stokes, slip-corrected), and what
 * follows from it: settling speed, the radius behind a settling speed, diffusion. Reynolds numbers here are
 * below 1e-3, where the inertial term (3/16) Re of Oseen is below 2e-4 and left out. Not for the properties
 * of air themselves (air.h).
 *
 * Slip: Cc = 1 + Kn (alpha + beta exp(-gamma/Kn)), Kn = mean free path/radius. Coefficients belong to the
 * mean free path that they were fitted with, so a law brings both (mixing them costs up to 20 % of Cc at 0.1
 * um). The one-term form 1 + b/(p a) is the same expression with alpha = 1, beta = 0 and b/p in place of the
 * mean free path. */
#pragma once

#include <stdbool.h>

#include "physics/medium.h"

typedef enum {
    RF_SLIP_KIM_2005, /* 1.165, 0.483, 0.997; 67.3 nm at 296.15 K, 101.3 kPa. Kim, Mulholland, Kukuck, Pui,
                         J. Res. NIST 110 (2005) 31; adopted by ISO 15900. Polystyrene spheres, 0.02..0.3 um
                       */
    RF_SLIP_ALLEN_RAABE_1985, /* 1.142, 0.558, 0.999; same path. Aerosol Sci. Technol. 4 (1985) 269. Solid
                                 spheres */
    RF_SLIP_DAVIES_1945, /* 1.257, 0.400, 1.10; 66 nm at 293.15 K, 101.325 kPa. Proc. Phys. Soc. 57 (1945) 259
                          */
    RF_SLIP_MILLIKAN_1923, /* 0.864, 0.29, 1.25; 94.17 nm at 296.15 K, 76 cmHg, which is Millikan's own
                              definition eta = 0.3502 rho c l. Phys. Rev. 22 (1923) 1. Oil drops */
    RF_SLIP_ONE_TERM,      /* 1 + b/(p a), b from the user; Millikan 1917: 6.17e-4 cm cmHg = 8.226e-3 Pa m */
} RfSlipLaw;

/* "kim-2005", "allen-raabe-1985", "davies-1945", "millikan-1923", "one-term". */
const char *rf_slip_law_to_string(RfSlipLaw law);
bool rf_slip_law_from_string(const char *text, RfSlipLaw *law);

/* Sets slip and mean_free_path_m of the medium, at its temperature_kelvin. slip_b_pa_m is read for
 * RF_SLIP_ONE_TERM only. */
void rf_drag_choose_slip(RfMedium *medium, RfSlipLaw law, double slip_b_pa_m, double pressure_pa);

/* Relative standard uncertainty of Cc - 1 that a slip law itself brings. At 0.5 um diameter in a room the laws
 * above, each with its own path, give Cc - 1 from 0.311 to 0.338: half of that range is 4.2 %, taken as the half-width
 * of a rectangular: 2.4 %. In charge, which goes as Cc^-1.5 at a given settling speed and field, that is 0.5 % at a
 * radius of 0.5 um and 0.3 % at 1 um. For the one-term form 0: the caller's sigma of b is taken instead. */
double rf_drag_slip_relative_u(RfSlipLaw law);

/* radius_m > 0 in all that follows. Below 20 nm the slip laws are extrapolated. */
double rf_drag_slip_factor(const RfMedium *medium, double radius_m);
double rf_drag_coefficient_kg_s(const RfMedium *medium, double radius_m);
double rf_drag_coefficient_slope_kg_s_m(const RfMedium *medium, double radius_m); /* dk/da */

/* Stokes-Einstein, k_B T/k; m^2/s. */
double rf_drag_diffusion_m2_s(const RfMedium *medium, double radius_m);

/* Net weight of a unit volume of droplet, (oil density - air density) g, in N/m^3. */
double rf_drag_net_weight_n_m3(const RfMedium *medium);

/* Field off: k v = (4/3) pi a^3 (oil density - air density) g. Speed in m/s, positive downward; slope dv/da.
 */
double rf_drag_settling_speed_m_s(const RfMedium *medium, double radius_m);
double rf_drag_settling_slope_per_s(const RfMedium *medium, double radius_m);

/* The one radius that settles at speed_m_s > 0 (the speed rises steadily with radius): closed form for
 * one-term slip, else by root finding between the two one-term radii that enclose it, to 1e-12. */
double rf_drag_radius_m(const RfMedium *medium, double speed_m_s);

/* The one radius with this drag coefficient, or this diffusion coefficient (both > 0). */
double rf_drag_radius_of_coefficient_m(const RfMedium *medium, double coefficient_kg_s);
double rf_drag_radius_of_diffusion_m(const RfMedium *medium, double diffusion_m2_s);
