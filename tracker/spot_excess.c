#include "tracker/spot_excess.h"

#include <math.h>

double rf_spot_excess(const RfLocaliser *localiser, const RfPatchPixel *pixels, const float *models,
                      unsigned n, const RfSpotFit *fit, double offset)
{
    double product[2] = {0, 0}, square[2] = {0, 0};
    for (unsigned p = 0; p < n; p++) {
        double model = (double)models[p], residual = (double)pixels[p].excess - offset - model;
        double weight = 1 / (localiser->var_factor * (double)pixels[p].var +
                             localiser->photon_var_per_level * fmax(model, 0));
        double x = ((double)pixels[p].x_px - fit->x_px) * localiser->pixel_aspect / fit->width_px,
               y = ((double)pixels[p].y_px - fit->y_px) / fit->width_px;
        double shape[2] = {(x * x - y * y) * model, 2 * x * y * model};
        for (int k = 0; k < 2; k++) {
            product[k] += weight * shape[k] * residual;
            square[k] += weight * shape[k] * shape[k];
        }
    }
    if (!(square[0] > 0 && square[1] > 0)) return 0;
    return (product[0] * product[0] / square[0] + product[1] * product[1] / square[1]) / 2;
}
