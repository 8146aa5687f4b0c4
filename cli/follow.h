/* From sightings to droplets' paths in millimetres. Paths are linked twice: once knowing nothing of the field, then
 * again with the switches that the first paths tell, so that reversals are expected instead of guessed. In between,
 * the axis of gravity is read from the motion. Not for charges: measure.h. */
#pragma once

#include <glib.h>

#include "calib/gravity_axis.h"
#include "calib/length_scale.h"
#include "calib/picture_frame.h"
#include "cli/settings.h"
#include "physics/field_timeline.h"
#include "tracker/path.h"
#include "tracker/sightings.h"

typedef struct {
    RfPaths *paths;       /* final ones */
    RfPictureFrame frame; /* pixels of the reference picture to metres */
    RfGravityAxis axis;   /* as found from the motion */
    GArray *rows;         /* RfPathRow, by droplet, then time */
} RfFollow;

/* (returns new) No path at all is a result, not an error. */
RfFollow *rf_follow_droplets(const RfSightings *sightings, const RfLengthScale *scale, const RfSettings *settings,
                             const RfFieldSheet *sheet, GError **error);
void rf_follow_free(RfFollow *follow);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfFollow, rf_follow_free)
