#include "tracker/sightings.h"

#include <math.h>

RfSightings *rf_sightings_new(int width, int height, double pixel_aspect)
{
    RfSightings *sightings = g_new0(RfSightings, 1);
    sightings->width = width;
    sightings->height = height;
    sightings->pixel_aspect = pixel_aspect;
    sightings->exposures = g_array_new(false, false, sizeof(RfExposure));
    sightings->spots = g_array_new(false, false, sizeof(RfSpot));
    return sightings;
}

void rf_sightings_free(RfSightings *sightings)
{
    if (!sightings) return;
    g_array_unref(sightings->exposures);
    g_array_unref(sightings->spots);
    g_free(sightings);
}

void rf_pose_to_reference(const RfPose *pose, const RfSightings *picture, double x_px, double y_px,
                          double *x_ref_px, double *y_ref_px)
{
    double centre_x = 0.5 * (picture->width - 1), centre_y = 0.5 * (picture->height - 1);
    double right = (x_px - centre_x - pose->shift_x_px) * picture->pixel_aspect;
    double down = y_px - centre_y - pose->shift_y_px;
    double c = cos(pose->angle_rad), s = sin(pose->angle_rad);
    *x_ref_px = (c * right + s * down) / picture->pixel_aspect + centre_x;
    *y_ref_px = -s * right + c * down + centre_y;
}

void rf_pose_from_reference(const RfPose *pose, const RfSightings *picture, double x_ref_px, double y_ref_px,
                            double *x_px, double *y_px)
{
    double centre_x = 0.5 * (picture->width - 1), centre_y = 0.5 * (picture->height - 1);
    double right = (x_ref_px - centre_x) * picture->pixel_aspect, down = y_ref_px - centre_y;
    double c = cos(pose->angle_rad), s = sin(pose->angle_rad);
    *x_px = (c * right - s * down) / picture->pixel_aspect + centre_x + pose->shift_x_px;
    *y_px = s * right + c * down + centre_y + pose->shift_y_px;
}
