/* A play of droplets for the tests of linking: droplets fall, rise, diffuse, meet, hide; what a detector would make of it
 * comes out as sightings, beside the truth. Not for pictures. Everything random comes from one fixed seed. */
#pragma once

#include <glib.h>

#include "tracker/field_course.h"
#include "tracker/sightings.h"

typedef struct {
    double x_px, y_px;             /* at frame `from` */
    double vx_px_s, vy_px_s;       /* without field */
    double response_px_s;          /* along y, in state +1 */
    double spread_px;              /* Brownian step per frame and axis, sd */
    int from, until;               /* frames in which it exists: [from, until) */
    int hidden_from, hidden_until; /* not seen in these */
    double peak;                   /* 0: 60 grey levels */
} RfActor;

typedef struct {
    const RfActor *actors;
    unsigned n_actors;
    int frames;
    double rate_hz;
    double noise_px, stated_px; /* localisation error made, and claimed (0: the same) */
    double miss;                /* chance that a spot isn't found */
    double false_spots;         /* per frame, anywhere */
    double merge_px;            /* spots nearer than this come as one, in the middle */
    RfFieldCourse field;
    int repeated_every; /* > 0: every so many frames the picture is the one before */
    unsigned long seed;
    int width, height;   /* 0: 640 x 480 */
    double pixel_aspect; /* 0: 1 */
    double shake_px;     /* amplitude of a slow movement of the camera, with a roll of a thousandth of it */
} RfPlay;

/* (returns new) truth: (out, new) of GArray of RfScorePoint, the frames in which each actor exists inside the picture. */
RfSightings *rf_spot_play_run(const RfPlay *play, GPtrArray **truth);
