#include "tracker/spot_excess.h"

#include <math.h>

double rf_spot_excess(const RfLocaliser *localiser, const RfPatchPixel *pixels, const float *models,
                      unsigned n, const RfSpotFit *fit, double offset)
{
    double product = 0, square = 0;
    for (unsigned p = 0; p < n; p++) {
        double model = (double)models[p], residual = (double)pixels[p].excess - offset - model;
        double weight = 1 / (localiser->var_factor * (double)pixels[p].var +
                             localiser->photon_var_per_level * fmax(model, 0));
        double x = ((double)pixels[p].x_px - fit->x_px) * localiser->pixel_aspect / fit->width_px,
               y = ((double)pixels[p].y_px - fit->y_px) / fit->width_px;
        double shape = x * y * model;
        product += weight * shape * residual;
        square += weight * shape * shape;
    }
    return square > 0 ? product * product / square : 0;
}
