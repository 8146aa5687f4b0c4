/* How bright the lamp is in one exposure compared with the background: one gain per row, since a rolling shutter turns
 * mains flicker into bands. Light scales, the sensor's black level doesn't. Robust to droplets. */
#pragma once

#include "tracker/background.h"
#include "tracker/frame.h"
#include "tracker/sightings.h"

#define RF_LAMP_BANDS 24

typedef struct {
    double gain; /* of the whole exposure; unitless, 1 as in the background */
    double band_gain
        [RF_LAMP_BANDS]; /* from top to bottom; all equal `gain` where bands don't differ beyond chance */
} RfLamp;

/*  line_step   1, or 2 for one field of an interlaced frame whose first line is `first_line`
 *  black_level of the sensor, grey levels */
void rf_lamp_measure(const float *level, const RfPixelNoise *noise, double pixel_aspect, const RfFrame *frame,
                     const RfPose *pose, int first_line, int line_step, RfLamp *lamp);

/* Gain at a row of the picture, between the bands' middles. Pure. */
static inline double rf_lamp_gain(const RfLamp *lamp, double y_px, int height)
{
    double band = (y_px + 0.5) * RF_LAMP_BANDS / height - 0.5;
    band = band < 0 ? 0 : band > RF_LAMP_BANDS - 1 ? RF_LAMP_BANDS - 1 : band;
    int below = (int)band < RF_LAMP_BANDS - 1 ? (int)band : RF_LAMP_BANDS - 2;
    double part = band - below;
    return lamp->band_gain[below] * (1 - part) + lamp->band_gain[below + 1] * part;
}
