/* The air, the oil and the plates as one droplet feels them: the common inputs of every charge, in SI.
 * Not for finding these numbers from temperature and pressure (air.h, drag.h do that), and not for their
 * uncertainties: those are common to all droplets and enter the budget, never a single fit. */
#pragma once

#include "physics/drag.h"

typedef struct {
    RfDrag drag;               /* viscosity and slip: k = 6 pi eta a/Cc */
    double oil_density_kg_m3;  /* > air density */
    double air_density_kg_m3;  /* >= 0, moist */
    double temperature_kelvin; /* > 0; rules diffusion */
    double gravity_m_s2;       /* > 0 */
    double plate_gap_m;        /* > 0 */
} RfMedium;
