#include "cli/settings_keys.h"

#include <string.h>

#define AT(member) offsetof(RfSheetValues, member)
#define SET(member) offsetof(RfSheetValues, settings.member)

/* clang-format off */
const RfSettingsKey rf_settings_keys[] = {
    {"recording", "video", RF_KEY_PATHS, NULL, 0, 0, NULL, NULL,
     "path relative to the sheet; several files in order, separated by ;", SET(videos)},
    {"recording", "start", RF_KEY_MAYBE_QUANTITY, "s", 0, 1e7, NULL, NULL,
     "part to use: from here, as in 5 s", SET(start_s)},
    {"recording", "stop", RF_KEY_MAYBE_QUANTITY, "s", 0, 1e7, NULL, NULL,
     "part to use: up to here, as in 60 s", SET(stop_s)},
    {"recording", "frame_rate", RF_KEY_MAYBE_QUANTITY, "Hz", 0.01, 1e6, NULL, NULL,
     "where the file's timestamps can't be trusted, as in 30.000(1) Hz", SET(frame_rate_hz)},
    {"recording", "timings", RF_KEY_PATH, NULL, 0, 0, NULL, NULL,
     "table of hand timings to audit", SET(timings)},
    {"recording", "review", RF_KEY_PATH, NULL, 0, 0, NULL, NULL,
     "review file to honour", SET(review)},
    {"recording", "gravity", RF_KEY_WORD, "down|up|left|right|find", 0, 0, "down", "not stated in the sheet",
     "which way things fall in the picture", AT(gravity_word)},

    {"reticle", "image", RF_KEY_PATH, NULL, 0, 0, NULL, NULL,
     "still of the reticle; without it the recording's own fixed background serves", SET(reticle_image)},
    {"reticle", "spacing", RF_KEY_QUANTITY, "m", 1e-8, 1, NULL, NULL,
     "between neighbouring lines, as in 0.1000(2) mm", SET(spacing_m)},
    {"reticle", "lines", RF_KEY_WORD, "grid|horizontal|vertical", 0, 0, "grid", "not stated in the sheet",
     "which lines the reticle has", AT(lines_word)},
    {"reticle", "plane_ratio", RF_KEY_QUANTITY, "1", 0.1, 10, "1", "droplets taken to be in the reticle's plane",
     "scale in the droplets' plane over scale in the reticle's plane, as in 1.000(2)", SET(plane_ratio)},

    {"cell", "plate_gap", RF_KEY_QUANTITY, "m", 1e-6, 1, NULL, NULL,
     "distance of the plates, as in 6.000(10) mm", SET(plate_gap_m)},
    {"cell", "gravity", RF_KEY_MAYBE_QUANTITY, "m s-2", 0.1, 100, NULL, NULL,
     "local gravity, as in 9.8106(5) m/s^2; or latitude and height; or neither", AT(gravity_m_s2)},
    {"cell", "latitude", RF_KEY_MAYBE_QUANTITY, "degree", -90, 90, NULL, NULL,
     "geographic latitude, as in 52.5 degree", AT(latitude_deg)},
    {"cell", "height", RF_KEY_MAYBE_QUANTITY, "m", -500, 9000, NULL, NULL,
     "height above the sea, as in 120 m", AT(height_m)},

    {"oil", "density", RF_KEY_QUANTITY, "kg m-3", 100, 3e4, NULL, NULL,
     "of the oil, as in 886.0(10) kg/m^3", SET(density_kg_m3)},
    {"oil", "density_at", RF_KEY_MAYBE_QUANTITY, "K", 150, 600, NULL, NULL,
     "temperature at which that density holds, as in 20 degC; needs density_slope", SET(density_at_kelvin)},
    {"oil", "density_slope", RF_KEY_MAYBE_QUANTITY, "kg m-3 K-1", -50, 50, NULL, NULL,
     "change with temperature, as in -0.65(5) kg/m^3/K; needs density_at", SET(density_slope_kg_m3_kelvin)},

    {"certificate", "radius", RF_KEY_MAYBE_QUANTITY, "m", 1e-8, 1e-4, NULL, NULL,
     "certified spheres in place of oil: their radius, as in 0.500(3) um; checks the whole chain", SET(certified_radius_m)},
    {"certificate", "density", RF_KEY_MAYBE_QUANTITY, "kg m-3", 100, 3e4, NULL, NULL,
     "their density, as in 1050.0(5) kg/m^3, against that of [oil]", SET(certified_density_kg_m3)},

    {"air", "temperature", RF_KEY_MAYBE_QUANTITY, "K", 200, 400, NULL, NULL,
     "in the cell, as in 23.0(2) degC; or resistance beside a [thermistor] group", AT(temperature_kelvin)},
    {"air", "resistance", RF_KEY_MAYBE_QUANTITY, "ohm", 1e-3, 1e9, NULL, NULL,
     "of the thermistor in the cell, as in 10.85(1) kohm", SET(resistance_ohm)},
    {"air", "pressure", RF_KEY_QUANTITY, "Pa", 100, 1e6, NULL, NULL,
     "of the air in the cell, as in 101.30(5) kPa", SET(pressure_pa)},
    {"air", "humidity", RF_KEY_QUANTITY, "1", 0, 1, "50(29) %", "not stated: anything from 0 to 100 % (rectangular)",
     "relative humidity, as in 45(5) %", SET(humidity)},

    {"thermistor", "a", RF_KEY_MAYBE_QUANTITY, "1", -1, 1, NULL, NULL,
     "1/T = a + b ln R + c (ln R)^3 with T in kelvin and R in ohm, as in 1.129e-3", AT(thermistor_per_kelvin[0])},
    {"thermistor", "b", RF_KEY_MAYBE_QUANTITY, "1", -1, 1, NULL, NULL, "as above", AT(thermistor_per_kelvin[1])},
    {"thermistor", "c", RF_KEY_MAYBE_QUANTITY, "1", -1, 1, NULL, NULL, "as above", AT(thermistor_per_kelvin[2])},
    {"thermistor", "d", RF_KEY_MAYBE_QUANTITY, "1", -1, 1, NULL, NULL,
     "makes it 1/T = a + b l + c l^2 + d l^3 with l = ln(R/reference)", AT(thermistor_per_kelvin[3])},
    {"thermistor", "reference", RF_KEY_MAYBE_QUANTITY, "ohm", 1e-3, 1e9, NULL, NULL,
     "resistance that l refers to, as in 10 kohm; goes with d", AT(thermistor_reference_ohm)},
    {"thermistor", "uncertainty", RF_KEY_MAYBE_QUANTITY, "K", 0, 50, NULL, NULL,
     "of the law itself, as in 0.1 K", AT(thermistor_u_kelvin)},
    {"thermistor", "table", RF_KEY_PATH, NULL, 0, 0, NULL, NULL,
     "in place of coefficients: a table with columns resistance_ohm and temperature_degC (or _K)", AT(thermistor_table)},

    {"supply", "voltage", RF_KEY_MAYBE_QUANTITY, "V", 1e-3, 1e6, NULL, NULL,
     "between the plates while the field is on, as in 500.0(5) V", SET(voltage_V)},
    {"supply", "voltage_top_plus", RF_KEY_MAYBE_QUANTITY, "V", 1e-3, 1e6, NULL, NULL,
     "where the two polarities differ: with the top plate positive", SET(voltage_top_plus_V)},
    {"supply", "voltage_top_minus", RF_KEY_MAYBE_QUANTITY, "V", 1e-3, 1e6, NULL, NULL,
     "where the two polarities differ: with the top plate negative", SET(voltage_top_minus_V)},
    {"supply", "states", RF_KEY_STATES, "off|top+|top-", 0, 0, NULL, NULL,
     "the field states in the order in which they first occur, as in off,top+", SET(states)},
    {"supply", "log", RF_KEY_PATH, NULL, 0, 0, NULL, NULL,
     "table time_s,voltage_V on a clock of its own; its voltages win", SET(log)},

    {"analysis", "slip", RF_KEY_WORD, "kim-2005|allen-raabe-1985|davies-1945|millikan-1923|one-term", 0, 0, "kim-2005",
     "the coefficients that ISO 15900 adopted", "slip correction; one-term takes slip_b", AT(slip_word)},
    {"analysis", "slip_b", RF_KEY_MAYBE_QUANTITY, "Pa m", 1e-4, 1, NULL, NULL,
     "b of 1 + b/(p a), as in 8.226e-3 Pa m; goes with slip=one-term", SET(slip_b_pa_m)},
    {"analysis", "viscosity", RF_KEY_VISCOSITY, "Pa s", 1e-6, 1e-4, "iso-15900",
     "ISO 15900 reference relation; published laws differ by 0.4 %, which is in the budget",
     "iso-15900, us-1976, or a value such as 1.8325(27)e-5 Pa s", SET(viscosity_pa_s)},
};
/* clang-format on */

const size_t rf_settings_n_keys = G_N_ELEMENTS(rf_settings_keys);

const RfSettingsKey *rf_settings_key_find(const char *group, const char *key)
{
    for (size_t i = 0; i < rf_settings_n_keys; i++)
        if (strcmp(rf_settings_keys[i].group, group) == 0 && strcmp(rf_settings_keys[i].key, key) == 0)
            return &rf_settings_keys[i];
    return NULL;
}
