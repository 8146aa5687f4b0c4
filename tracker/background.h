/* The fixed part of the picture, and how noisy it is: learned once from frames spread over the recording,
 * then only read. Not for droplets: what moves is left out by a per-pixel median, what stays (reticle,
 * numerals, dust, hot pixels) is part of it. Levels are grey levels of the file's bit depth; images are row
 * after row, no padding. */
#pragma once

#include "tracker/picture_sample.h"
#include "tracker/sightings.h"

#include <glib.h>

typedef enum {
    RF_PIXEL_LINE = 1 << 0, /* something dark of the reticle (line, numeral) lies here */
    RF_PIXEL_BAD = 1 << 1, /* hot, dead or flickering pixel, or a small bright speck: left out of every fit */
} RfPixelFlags;

/* Variance of one pixel: read_var + photon_var_per_level * max(0, level - black_level), grey levels squared.
 */
typedef struct {
    double read_var, photon_var_per_level, black_level;
} RfPixelNoise;

typedef struct {
    int width, height, bit_depth;
    double pixel_aspect;
    bool is_interlaced, is_top_field_first;
    bool is_moving;          /* the camera moves: `level` is in the reference picture's place */
    double movement_rms_px;  /* of the camera over the sample */
    double saturation_level; /* at or above: the pixel tells nothing */
    RfPixelNoise noise;
    float *level;          /* the reference picture */
    float *transmission;   /* (0, 1]: what reticle lines leave of the light, also of a droplet's */
    uint8_t *flags;        /* RfPixelFlags; LINE in the reference picture's place */
    uint8_t *sensor_flags; /* RF_PIXEL_BAD at stored pixels: bad pixels stay with the sensor when the camera
                              moves */
} RfBackground;

/* Needs 8 frames or more; the same with any number of threads (0: one per core). The reference picture of a moving camera is that of the sample's middle frame. */
RfBackground *rf_background_learn(const RfPictureSample *sample, int threads, GError **error);
void rf_background_free(RfBackground *background);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfBackground, rf_background_free)
double rf_pixel_noise_var(const RfPixelNoise *noise, double level);
