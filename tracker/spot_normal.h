/* The inner loop of every fit: models of a few spots over a list of pixels, and the normal equations of their unknowns,
 * in columns of floats that the compiler turns into vector instructions. Sums are taken in a fixed order of lanes, so
 * that every machine gets the same bytes. Not for steps: how to move towards the minimum is the fit's affair. */
#pragma once

#include "tracker/localise.h"

enum {
    RF_NORMAL_PER_SPOT = 4,
    RF_NORMAL_MOST = RF_LOCALISE_MOST_SPOTS * RF_NORMAL_PER_SPOT + 1,
    RF_NORMAL_BLOCK = 64, /* pixels taken at a time */
    RF_NORMAL_ROOM = RF_LOCALISE_MOST_PIXELS,
};
/* Unknowns of one spot; the common offset comes last of all. */
enum { RF_NORMAL_X, RF_NORMAL_Y, RF_NORMAL_PEAK, RF_NORMAL_WIDTH };

/* The pixels in columns, filled up to whole blocks with pixels of no weight. */
typedef struct {
    _Alignas(16) float x_px[RF_NORMAL_ROOM], y_px[RF_NORMAL_ROOM], excess[RF_NORMAL_ROOM],
        var[RF_NORMAL_ROOM], shade[RF_NORMAL_ROOM];
    _Alignas(16) float weight[RF_NORMAL_ROOM]; /* 1 / variance */
    _Alignas(16) float model[RF_NORMAL_ROOM];  /* of the state gathered last */
    unsigned n, padded;
    double origin_x_px, origin_y_px; /* x_px and y_px count from here, so that floats are fine enough */
    float left_px, right_px, top_px, bottom_px; /* of all places */
} RfPatchColumns;

typedef struct {
    double matrix[RF_NORMAL_MOST][RF_NORMAL_MOST]; /* lower triangle */
    double right[RF_NORMAL_MOST];
    double chi_square; /* weighted squares of the residuals */
} RfNormal;

void rf_spot_normal_fill(RfPatchColumns *columns, const RfPatchPixel *pixels, unsigned n);

/* Weights from the noise model: variance * factor, and what the light of `model` adds (nothing for photon 0). */
void rf_spot_normal_weigh(RfPatchColumns *columns, double factor, double photon_var_per_level);

/* Model at every pixel, and the equations linearised there, without priors. Rows beyond 4 n + 1 stay untouched. */
void rf_spot_normal_gather(const RfLocaliser *localiser, RfPatchColumns *columns, const RfSpotFit *spots,
                           unsigned n, double offset, RfNormal *normal);

/* Only the model. */
void rf_spot_normal_model(const RfLocaliser *localiser, RfPatchColumns *columns, const RfSpotFit *spots,
                          unsigned n);
