/* The path of one droplet: where it was seen in which exposure, what lay between, why it begins and ends.
 * Not for velocities or charges: those are read from the measured points by whoever knows the physics.
 *
 * Coordinates: x_px, y_px and smooth_*_px are stored pixels of their own exposure (the reference picture's
 * pixels come from rf_pose_to_reference). u_* is one standard uncertainty in the same pixels. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "tracker/sightings.h"

typedef enum {
    RF_PATH_BIRTH_RECORDING, /* there from the recording's first exposures on */
    RF_PATH_BIRTH_EDGE,      /* came in over the picture's edge */
    RF_PATH_BIRTH_FOCUS,     /* came into sight inside the picture */
    RF_PATH_BIRTH_AMBIGUOUS, /* cut: which droplet this was before can't be decided */
} RfPathBirth;

typedef enum {
    RF_PATH_DEATH_RECORDING, /* still there when the recording ends */
    RF_PATH_DEATH_EDGE,      /* left over the picture's edge */
    RF_PATH_DEATH_FOCUS,     /* lost from sight inside the picture for longer than the longest bridged gap */
    RF_PATH_DEATH_AMBIGUOUS, /* cut: which droplet this became can't be decided */
} RfPathDeath;

typedef struct {
    unsigned exposure;     /* index into RfSightings.exposures */
    int spot;              /* index into RfSightings.spots; -1: bridged */
    bool is_seen;          /* measured here; false: bridged, position and u are the smoother's */
    double x_px, y_px;     /* the measurement itself, untouched, where seen */
    double u_x_px, u_y_px; /* where seen: the spot's own, times RfPaths.noise.scale_* where that is above 1 */
    double smooth_x_px, smooth_y_px; /* fixed-interval smoother over the whole path */
    double u_smooth_x_px, u_smooth_y_px;
} RfPathPoint;

typedef struct {
    unsigned droplet; /* number from 1, in order of first appearance */
    GArray *points; /* of RfPathPoint, one per exposure from first to last seen, in order; first and last are
                       seen */
    RfPathBirth birth;
    RfPathDeath death;
    unsigned seen;          /* points with is_seen */
    double diffusion_px2_s; /* D along one axis, in square pixels (width of a stored pixel = pixel_aspect);
                               likeliest value */
    double
        evidence; /* log of likelihood (droplet) over likelihood (false spots), less the log of the chances to start */
    double median_snr;
} RfPath;

/* What the paths say about the spots' own uncertainties, pooled over the recording, per axis. A path's
 * increments have variance 2 D dt (1 - 2 R) + 2 s^2 and neighbouring increments covariance 2 R D dt - s^2
 * (Berglund, Phys. Rev. E 82 (2010) 011917): regressed on 2 D dt and on the stated u^2, with one R and one
 * scale for all. */
typedef struct {
    double scale_x, scale_y;     /* s / stated u; 1 where the data don't say */
    double u_scale_x, u_scale_y; /* one standard uncertainty; 0: not determined, scale is 1 by default */
    double blur;                 /* R, [0, 0.25]: motion during the exposure */
    double lag_px2[2][4]; /* [axis][lag]: pooled covariance of increments 0..3 exposures apart; white errors
                             give 0 beyond lag 1 */
    unsigned increments;  /* how many went in, per axis */
} RfPathErrors;

typedef struct {
    GPtrArray *paths; /* of RfPath (owned) */
    RfPathErrors noise;
    unsigned cuts; /* joins left undone because they could not be decided */
    unsigned set_aside_short,
        set_aside_still; /* chains dropped: too little evidence; did not move like a droplet */
} RfPaths;

void rf_path_free(RfPath *path);
void rf_paths_free(RfPaths *paths);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfPaths, rf_paths_free)
