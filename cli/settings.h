/* The run sheet: a key file becomes one validated struct in SI units. Not for using it: pipeline.c does.
 *
 * Anything wrong with a sheet is an RF_SETTINGS_ERROR that begins `sheet.ini: line 12: [cell] plate_gap: ` and says what was seen
 * and what would do. GKeyFile merges repeated groups and keys in silence and stops at a byte-order mark, so the text is
 * looked through line by line before GKeyFile sees it. Loading doesn't touch the recording; small tables that the sheet
 * names for a thermistor are read, all other files only resolved. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "calib/length_scale.h"
#include "calib/picture_frame.h"
#include "calib/units.h"
#include "physics/air.h"
#include "physics/drag.h"
#include "physics/trail.h"

typedef enum {
    RF_SETTINGS_ERROR_FILE,    /* can't be read, isn't a key file, a group or key that is repeated */
    RF_SETTINGS_ERROR_UNKNOWN, /* group or key that doesn't exist */
    RF_SETTINGS_ERROR_MISSING, /* needed, not there */
    RF_SETTINGS_ERROR_VALUE,   /* wrong form, dimension, or impossible */
} RfSettingsError;

#define RF_SETTINGS_ERROR (rf_settings_error_quark())
GQuark rf_settings_error_quark(void);

typedef struct {
    bool is_set;
    RfValue v;
} RfMaybeValue;

typedef struct {
    char *path; /* of the sheet, as given */

    /* [recording] */
    GPtrArray *videos; /* char*: resolved paths, in order; at least one */
    RfMaybeValue start_s, stop_s;
    RfMaybeValue frame_rate_hz;
    char *timings, *review;     /* resolved paths or NULL */
    RfGravityDirection gravity; /* meaningless if finds_gravity */
    bool finds_gravity;

    /* [reticle] */
    char *reticle_image; /* resolved path or NULL: the recording's own background */
    RfValue spacing_m;
    RfReticleLines lines;
    RfValue plane_ratio; /* unitless */

    /* [cell] */
    RfValue plate_gap_m;
    RfValue gravity_m_s2; /* from the sheet, or its latitude and height, or for a place unknown */

    /* [oil] */
    RfValue density_kg_m3;
    RfMaybeValue density_at_kelvin, density_slope_kg_m3_kelvin; /* both or neither */

    /* [certificate]: of spheres in place of oil */
    RfMaybeValue certified_radius_m, certified_density_kg_m3;

    /* [air]: the temperature is that of the thermistor where the sheet gives a resistance */
    RfValue temperature_kelvin;
    RfMaybeValue resistance_ohm; /* of the thermistor, where it serves */
    double thermistor_u_kelvin;  /* of its law: a part of the temperature's sigma */
    RfValue pressure_pa;
    RfValue humidity; /* unitless, 0..1 */

    /* [supply]: voltages are magnitudes */
    RfMaybeValue voltage_V, voltage_top_plus_V, voltage_top_minus_V; /* at least one unless there is a log */
    RfFieldState states[3]; /* in the order in which they first occur */
    unsigned n_states;      /* 0: not given, only with a log */
    char *log;              /* resolved path or NULL */

    /* [analysis] */
    RfSlipLaw slip;
    RfMaybeValue slip_b_pa_m; /* set if and only if slip is one-term */
    RfViscosityLaw viscosity; /* RF_VISCOSITY_GIVEN: viscosity_pa_s is set */
    RfMaybeValue viscosity_pa_s;

    /* RfUsedSetting (cli/results.h); results may hold on to them with g_array_ref */
    GArray *shared; /* [shared]: input -> name of the one measurement */
    GArray *notes;  /* [notes], word for word */
    GArray *used;   /* every key in force, defaults marked and explained */
} RfSettings;

/* (returns new), or NULL with the reason. Safe from any thread. */
RfSettings *rf_settings_load(const char *path, GError **error);
/* The same from text; relative paths resolve against `path`'s folder. */
RfSettings *rf_settings_parse(const char *text, size_t length, const char *path, GError **error);
void rf_settings_free(RfSettings *settings);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfSettings, rf_settings_free)

/* Magnitude of the voltage in a state: the polarity's own if the sheet gives one, else `voltage`; {0, 0} when off. False: a log must
 * say, the sheet doesn't. */
bool rf_settings_voltage(const RfSettings *settings, RfFieldState state, RfValue *voltage_V);
