/* What was seen where: every bright or dark spot found in every exposure, before anyone links them.
 * An exposure is one instant at which a picture was taken: a frame, or one field of an interlaced frame.
 * Spots of one exposure are contiguous, sorted by y_px then x_px; exposures are sorted by time. */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/* Where the reticle lies in this exposure, relative to the reference picture (the background model):
 * a stored pixel p shows what the reference shows at  R(-angle) (p - centre - shift) + centre,
 * centre being the middle of the picture ((width-1)/2, (height-1)/2). All zero for a camera at rest. */
typedef struct {
    double shift_x_px, shift_y_px;
    double angle_rad; /* positive from +x towards +y */
} RfPose;

typedef enum {
    RF_EXPOSURE_REPEATED = 1 << 0,  /* the same picture as the exposure before: not a new measurement */
    RF_EXPOSURE_DAMAGED = 1 << 1,   /* decoder concealed errors */
    RF_EXPOSURE_UNPOSED = 1 << 2,   /* registration failed: positions of this exposure can't be trusted */
} RfExposureFlags;

typedef struct {
    int64_t frame;      /* index of the frame in the recording */
    double time_s;      /* since the recording's first frame */
    RfPose pose;
    unsigned first_spot, spots;
    uint8_t field;      /* 0: frame or first field in time; 1: second field in time */
    uint8_t flags;      /* RfExposureFlags */
    uint8_t coding;     /* RfCoding of its frame */
} RfExposure;

typedef enum {
    RF_SPOT_SATURATED = 1 << 0, /* pixels at full scale inside the spot */
    RF_SPOT_CROWDED = 1 << 1,   /* another spot within reach of the fit: position less certain than u says */
    RF_SPOT_EDGE = 1 << 2,      /* fit window cut by the picture's edge */
    RF_SPOT_LINE = 1 << 3,      /* a reticle line lies under the spot */
} RfSpotFlags;

typedef struct {
    float x_px, y_px;     /* stored pixels of its frame (interlaced: of the full frame) */
    float u_x_px, u_y_px; /* one standard uncertainty from the fit and the noise model */
    float cov_xy_px2;
    float peak;           /* grey levels (of the file's bit depth) over the background, negative if darker */
    float snr;            /* |peak| over the noise sd of one pixel there */
    float width_px;       /* standard deviation of the fitted spot along x, stored pixels */
    uint32_t flags;       /* RfSpotFlags */
    float excess;         /* of what the fit left over noise (spot_excess.h); 0 where not known */
} RfSpot;

typedef struct {
    int width, height;    /* stored pixels */
    double pixel_aspect;  /* width of a stored pixel over its height */
    GArray *exposures;    /* of RfExposure */
    GArray *spots;        /* of RfSpot */
} RfSightings;

RfSightings *rf_sightings_new(int width, int height, double pixel_aspect);
void rf_sightings_free(RfSightings *sightings);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfSightings, rf_sightings_free)

/* Between a stored pixel of an exposure and the reference picture. Pure. Pixel aspect is taken into account:
 * the rotation acts in square pixels (x scaled by pixel_aspect). */
void rf_pose_to_reference(const RfPose *pose, const RfSightings *picture, double x_px, double y_px,
                          double *x_ref_px, double *y_ref_px);
void rf_pose_from_reference(const RfPose *pose, const RfSightings *picture, double x_ref_px, double y_ref_px,
                            double *x_px, double *y_px);
