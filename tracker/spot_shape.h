/* What a droplet's picture looks like: a round spot, one number wide. In focus it is a Gaussian; out of focus the blur
 * disc of the lens (geometrical optics) smoothed by that Gaussian, so a wide spot is flat on top with edges as steep as
 * the sharp spot's. `width` is the standard deviation along one axis: width^2 = focus_width^2 + (disc radius)^2 / 4.
 * Not for diffraction rings. Immutable; safe from any thread. */
#pragma once

#include <glib.h>
#include <math.h>
#include <stdbool.h>

typedef struct RfSpotShape RfSpotShape;

/*  focus_width_px  > 0: standard deviation of the sharpest spots; narrower ones are taken as plain Gaussians */
RfSpotShape *rf_spot_shape_new(double focus_width_px);
/* (returns new) the same, for another focus width; far quicker than anew, the table being in units of it. */
RfSpotShape *rf_spot_shape_resized(const RfSpotShape *shape, double focus_width_px);
void rf_spot_shape_free(RfSpotShape *shape);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfSpotShape, rf_spot_shape_free)

double rf_spot_shape_widest_px(const RfSpotShape *shape); /* wider spots can't be drawn */

/* The spot of one width, prepared for many pixels. */
typedef struct {
    const float *row, *wider_row; /* into the table */
    float part;                   /* from row to wider_row, 0..1 */
    float per_scale;              /* 1 / length scale, 1/px */
    float width_px;
    float step_px; /* of width from row to wider_row */
    bool is_sharp; /* plain Gaussian */
} RfSpotProfile;

RfSpotProfile rf_spot_shape_profile(const RfSpotShape *shape, double width_px);

/* At squared distance r2_px2 from the middle, relative to the peak there:
 *   value     0..1
 *   per_r2    d value / d x = per_r2 * x, where x is the offset from the middle along either axis, 1/px^2
 *   per_width d value / d width, 1/px */
typedef struct {
    float value, per_r2, per_width;
} RfSpotValue;

enum {
    RF_SPOT_SHAPE_PER_UNIT = 16,                         /* table steps per focus width along the radius */
    RF_SPOT_SHAPE_ENTRIES = 16 * RF_SPOT_SHAPE_PER_UNIT, /* each a value and a slope */
};

static inline RfSpotValue rf_spot_profile_at(const RfSpotProfile *profile, float r2_px2)
{
    float u = sqrtf(r2_px2) * profile->per_scale, at = u * RF_SPOT_SHAPE_PER_UNIT;
    RfSpotValue out = {0, 0, 0};
    if (at >= RF_SPOT_SHAPE_ENTRIES) return out;
    int i = (int)at;
    float t = at - (float)i;
    const float *a = profile->row + 2 * i, *b = profile->wider_row + 2 * i;
    float value = a[0] + t * (a[2] - a[0]), slope = a[1] + t * (a[3] - a[1]);
    if (profile->is_sharp) {
        out.value = value;
        out.per_width = -u * u * slope * profile->per_scale;
    } else {
        float wider = b[0] + t * (b[2] - b[0]), wider_slope = b[1] + t * (b[3] - b[1]);
        out.value = value + profile->part * (wider - value);
        out.per_width = (wider - value) / profile->step_px;
        slope += profile->part * (wider_slope - slope);
    }
    out.per_r2 = slope * profile->per_scale * profile->per_scale;
    return out;
}
