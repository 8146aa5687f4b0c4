/* The air, the oil and the plates as one droplet feels them: the common inputs of every charge, in SI.
 * Not for finding these numbers from temperature and pressure (air.h, drag.h do that), and not for their
 * uncertainties: those are common to all droplets and enter the budget, never a single fit.
 * Model: drag coefficient k = 6 pi eta a / Cc, Cc = 1 + Kn (alpha + beta exp(-gamma/Kn)), Kn = lambda/a
 * (form of Knudsen and Weber 1911; Millikan, Phys. Rev. 22 (1923) 1). */
#pragma once

/* Slip law, to be used with the mean free path it was fitted with. The one-term law Cc = 1 + b/(p a) is the
 * same form with alpha = 1, beta = 0, gamma = 1 and mean_free_path_m = b/p. All unitless. */
typedef struct {
    double alpha, beta, gamma;
} RfSlip;

typedef struct {
    double viscosity_pa_s;   /* > 0 */
    double mean_free_path_m; /* >= 0, of the slip law's convention; 0: no slip */
    RfSlip slip;
    double oil_density_kg_m3;  /* > air density */
    double air_density_kg_m3;  /* >= 0, moist */
    double temperature_kelvin; /* > 0; rules diffusion */
    double gravity_m_s2;       /* > 0 */
    double plate_gap_m;        /* > 0 */
} RfMedium;
