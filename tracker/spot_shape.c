#include "tracker/spot_shape.h"

#include <gsl/gsl_sf_bessel.h>
#include <math.h>

enum {
    ROWS = 44, /* relative widths w with w^2 = 1 + ROW_STEP * row^2 */
    PER_UNIT = RF_SPOT_SHAPE_PER_UNIT,
    ENTRIES = RF_SPOT_SHAPE_ENTRIES,
    SLICES = 48, /* of the disc's radius, for Simpson's rule */
    NUMBERS = 2, /* value, slope */
};
/* Between rows the table is linear in w^2, in which a barely blurred spot is linear too: no kink where discs begin. */
static const double ROW_STEP = 0.014;

static const double FAR = 6.5; /* exp(-FAR^2 / 2) is below what a float tells from nothing */

struct RfSpotShape {
    double focus_width_px;
    float table[ROWS][ENTRIES + 1][NUMBERS];
};

/* Disc of radius t smoothed by a unit Gaussian, relative to its middle: with I0 the modified Bessel function,
 *   f(u) = integral_0^t rho exp(-(u^2 + rho^2)/2) I0(u rho) d rho / (1 - exp(-t^2/2)),
 * and f'(u)/u from d/du of the integrand. */
static void smoothed_disc(double u, double t, double *value, double *slope_over_u)
{
    if (t < 1e-6) {
        *value = exp(-u * u / 2);
        *slope_over_u = -*value;
        return;
    }
    double sum = 0, slope = 0, h = t / SLICES;
    for (int i = 1; i <= SLICES; i++) { /* the integrand vanishes at 0 */
        double rho = i * h, weight = i == SLICES ? 1 : i % 2 ? 4 : 2;
        if (fabs(u - rho) > FAR) continue;
        double bell = weight * rho * exp(-(u - rho) * (u - rho) / 2);
        double i0 = gsl_sf_bessel_I0_scaled(u * rho);
        double i1_over_u = u > 1e-3 ? gsl_sf_bessel_I1_scaled(u * rho) / u : rho / 2;
        sum += bell * i0;
        slope += bell * (rho * i1_over_u - i0);
    }
    double norm = h / 3 / (1 - exp(-t * t / 2));
    *value = sum * norm;
    *slope_over_u = slope * norm;
}

RfSpotShape *rf_spot_shape_new(double focus_width_px)
{
    g_assert(focus_width_px > 0);
    RfSpotShape *shape = g_new0(RfSpotShape, 1);
    shape->focus_width_px = focus_width_px;
    for (int row = 0; row < ROWS; row++) {
        double disc = 2 * row * sqrt(ROW_STEP);
        for (int i = 0; i <= ENTRIES; i++) {
            double value, slope_over_u;
            smoothed_disc((double)i / PER_UNIT, disc, &value, &slope_over_u);
            shape->table[row][i][0] = (float)value;
            shape->table[row][i][1] = (float)slope_over_u;
        }
    }
    return shape;
}

RfSpotShape *rf_spot_shape_resized(const RfSpotShape *shape, double focus_width_px)
{
    g_assert(focus_width_px > 0);
    RfSpotShape *resized = g_new(RfSpotShape, 1);
    *resized = *shape;
    resized->focus_width_px = focus_width_px;
    return resized;
}

void rf_spot_shape_free(RfSpotShape *shape)
{
    g_free(shape);
}

double rf_spot_shape_widest_px(const RfSpotShape *shape)
{
    return shape->focus_width_px * sqrt(1 + ROW_STEP * (ROWS - 1) * (ROWS - 1));
}

RfSpotProfile rf_spot_shape_profile(const RfSpotShape *shape, double width_px)
{
    double relative = width_px / shape->focus_width_px, blur = MAX(0.0, relative * relative - 1);
    int row = MIN((int)sqrt(blur / ROW_STEP), ROWS - 2);
    double interval = ROW_STEP * (2 * row + 1);
    bool is_sharp = relative <= 1;
    return (RfSpotProfile){
        .row = shape->table[row][0],
        .wider_row = shape->table[row + 1][0],
        .part = (float)MIN(1.0, (blur - ROW_STEP * row * row) / interval),
        .per_scale = (float)(1 / (is_sharp ? width_px : shape->focus_width_px)),
        .width_px = (float)width_px,
        .step_px = (float)(interval * shape->focus_width_px / (2 * relative)),
        .is_sharp = is_sharp,
    };
}
