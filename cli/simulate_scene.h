/* What a synthetic recording shows: a key file read into SI units, every value checked, every default named in one
 * table. Not for the truth: the scene states inputs as a person would (6.000(10) mm); simulate_inputs.h draws what
 * they really were. */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stdint.h>

#include "calib/units.h"
#include "physics/trail.h"

typedef enum {
    RF_SIMULATE_SCENE_ERROR_SYNTAX,  /* not a key file, or a key given twice */
    RF_SIMULATE_SCENE_ERROR_UNKNOWN, /* a group or key that no scene has */
    RF_SIMULATE_SCENE_ERROR_VALUE,   /* wrong dimension, not finite, out of range, contradicting another */
} RfSimulateSceneError;

#define RF_SIMULATE_SCENE_ERROR (rf_simulate_scene_error_quark())
GQuark rf_simulate_scene_error_quark(void);

typedef struct { /* drawn evenly between the two; equal: not drawn */
    double low, high;
} RfRange;

typedef enum {
    RF_SCENE_LINES_NONE,
    RF_SCENE_LINES_GRID,
    RF_SCENE_LINES_HORIZONTAL,
    RF_SCENE_LINES_VERTICAL,
} RfSceneLines;

typedef enum { /* the way things fall, in quarter turns from +y towards -x */
               RF_SCENE_GRAVITY_DOWN,
               RF_SCENE_GRAVITY_LEFT,
               RF_SCENE_GRAVITY_UP,
               RF_SCENE_GRAVITY_RIGHT,
} RfSceneGravity;

typedef enum {
    RF_SCENE_SIGN_MINUS,
    RF_SCENE_SIGN_PLUS,
    RF_SCENE_SIGN_BOTH,
} RfSceneSign;

typedef enum {
    RF_SCENE_CODEC_FFV1,
    RF_SCENE_CODEC_H264,
    RF_SCENE_CODEC_MJPEG,
    RF_SCENE_CODEC_MPEG2,
} RfSceneCodec;

typedef struct { /* from time_s on, this many e */
    double time_s;
    int units;
} RfSpell;

typedef struct {       /* a droplet laid down by hand: [droplet NAME] */
    double x_px, y_px; /* at the start, in the reference picture */
    double radius_m;
    double brightness; /* peak in focus, grey levels of 255 */
    double depth_m;    /* out of the plane of focus */
    GArray *spells;    /* RfSpell, first at -infinity */
} RfSceneDroplet;

typedef struct {
    double time_s;
    RfFieldState state;
} RfSceneSwitch;

typedef struct {
    /* [picture]; grey levels are those of an 8-bit picture, whatever bit_depth is */
    int width, height, bit_depth, seed;
    double pixel_aspect, frame_rate_hz, rate_jitter, duration_s, px_per_mm, exposure; /* px: rows */
    bool is_interlaced;
    int dropped, repeated;
    double background, gradient, photons_per_level, read_noise, point_spread_px;
    int hot_pixels, dust;
    double flicker, flicker_rate_hz, lamp_drift;
    /* [reticle] */
    RfSceneLines lines;
    RfValue spacing_m;
    double line_width_m, transmission, rotation_rad;
    bool has_numerals, has_still;
    /* [camera] */
    RfSceneGravity gravity;
    double roll_rad, wander_px, wander_time_s, wander_rad;
    /* [cell] [oil] [air] [supply]: as a run sheet states them */
    RfValue plate_gap_m, gravity_m_s2, density_kg_m3, temperature_kelvin, pressure_pa, humidity, voltage_v;
    /* [droplets] */
    int count, units_low, units_high;
    RfSceneSign sign;
    RfRange radius_m, brightness;
    bool is_refilled; /* a droplet that left is replaced by another one that enters */
    double depth_of_focus_m, depth_range_m, evaporation_m2_s, steps_hz;
    GArray *by_hand; /* RfSceneDroplet */
    /* [motion] */
    double drift_m_s, drift_time_s, tilt_rad;
    /* [field] */
    RfRange off_s, on_s;
    GArray *switches; /* RfSceneSwitch; empty: drawn from off_s and on_s */
    GArray *states;   /* RfFieldState, in order of first occurrence */
    /* [log] */
    double log_interval_s; /* 0: no log */
    double log_offset_s, log_noise_v;
    /* [hand] */
    int entries, line_miscounts, digit_slips, other_droplets, disagreements, switched_inside, unmatched;
    double hand_bias_s, hand_spread_s,
        hand_clock_s; /* clock: what the person's shows less the recording's time */
    /* [video] */
    RfSceneCodec codec;
    int quality; /* crf or quantiser; ignored by ffv1 */

    GKeyFile *source; /* for the words of the sheet */
} RfScene;

/* (returns new) NULL with RF_SIMULATE_SCENE_ERROR, or a file error; messages name file, group and key. */
RfScene *rf_simulate_scene_load(const char *path, GError **error);
void rf_simulate_scene_free(RfScene *scene);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfScene, rf_simulate_scene_free)

/* What the scene file says, or the default in the same form. (returns new) */
char *rf_simulate_scene_text(const RfScene *scene, const char *group, const char *key);

/* "off", "top+", "top-". */
const char *rf_simulate_scene_state_name(RfFieldState state);
