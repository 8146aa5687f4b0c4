/* Acceleration of gravity where the cell stands, from latitude and height, or from nothing. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "calib/units.h"

/* Normal gravity of WGS84 on the ellipsoid (Somigliana's formula; ge = 9.7803253359 m/s^2, k =
 * 0.00193185265241, e^2 = 0.00669437999013; NIMA TR8350.2). GRS80 is 1.4e-6 m/s^2 higher. Latitude -90..90
 * degrees, geodetic. Pure. */
double rf_local_gravity_normal_m_s2(double latitude_deg);

/* The same at a height above the ellipsoid: g (1 - 2h/a (1 + f + m - 2 f sin^2 lat) + 3 h^2/a^2), a
 * second-order expansion of the free-air decrease (WGS84; near 0.3086 mGal/m). */
double rf_local_gravity_at_height_m_s2(double latitude_deg, double height_m);

/* For the budget: with sigma 5.0e-4 m/s^2 for what normal gravity doesn't know (rock below and around;
 * free-air anomalies are mostly below 50 mGal), which is 5e-5 and hardly counts. Refuses latitudes beyond 90
 * degrees and heights outside -500..9000 m. */
bool rf_local_gravity_estimate(double latitude_deg, double height_m, RfValue *gravity_m_s2, GError **error);

/* Nothing known: 9.80665 m/s^2. Measured gravity at places where people live and work lies within 9.764 (high
 * in the tropics) and 9.834 m/s^2 (sea level near the poles); a rectangular of that half-width, 0.035, has
 * sigma 0.020. */
RfValue rf_local_gravity_unknown(void);
