#include "tracker/spot_excess.h"

#include <math.h>

enum { SHAPES = 4 };

/* cos and sin of twice and three times the angle, times the radius to the same power. */
static void shapes_at(double x, double y, double shape[SHAPES])
{
    shape[0] = x * x - y * y;
    shape[1] = 2 * x * y;
    shape[2] = x * (x * x - 3 * y * y);
    shape[3] = y * (3 * x * x - y * y);
}

RfSpotExcess rf_spot_excess(const RfLocaliser *localiser, const RfPatchPixel *pixels, const float *models,
                            unsigned n, const RfSpotFit *fit, double offset)
{
    double product[SHAPES] = {0}, square[SHAPES] = {0}, excess[SHAPES];
    for (unsigned p = 0; p < n; p++) {
        double shape[SHAPES], model = (double)models[p];
        double residual = (double)pixels[p].excess - offset - model;
        double weight = 1 / (localiser->var_factor * (double)pixels[p].var +
                             localiser->photon_var_per_level * fmax(model, 0));
        shapes_at(((double)pixels[p].x_px - fit->x_px) * localiser->pixel_aspect / fit->width_px,
                  ((double)pixels[p].y_px - fit->y_px) / fit->width_px, shape);
        for (int k = 0; k < SHAPES; k++) {
            product[k] += weight * shape[k] * model * residual;
            square[k] += weight * shape[k] * model * shape[k] * model;
        }
    }
    for (int k = 0; k < SHAPES; k++) {
        if (!(square[k] > 0)) return (RfSpotExcess){0, 0};
        excess[k] = product[k] * product[k] / square[k];
    }
    return (RfSpotExcess){(float)((excess[0] + excess[1]) / 2), (float)((excess[2] + excess[3]) / 2)};
}
