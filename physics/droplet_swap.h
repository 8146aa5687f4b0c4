/* Whether a change in one path is a new charge or another droplet: two droplets that met may have been taken for one
 * another, or have merged. Not for finding the change (charge_step.h).
 *
 * A charge step leaves the radius as it was; another droplet has another one, which its fall and its spread both show. The
 * two sides are fitted each by itself; the odds are those of a second radius, drawn from the spread of radii among
 * droplets, against the same one (the price of the parameter is in them), times how much rarer it is beforehand. */
#pragma once

#include "physics/droplet_fit.h"

typedef struct {
    double time_s;             /* from here on another droplet */
    RfValue log_radius_change; /* ln(after/before) */
    double log_odds;           /* of another droplet against a step; > 0: another droplet */
} RfDropletSwap;

/* The likeliest swap in place of one of the droplet's steps.
 *   model      with the steps
 *   step       its index
 *   across_off from and to, seconds, of the off state that the step lies in; from = to: the step's own instant
 *   returns    false where either side is too short for a fit: nothing speaks for a swap */
bool rf_droplet_swap_weigh(const RfTrail *trail, const RfDropletModel *model, size_t step, double from_s,
                           double to_s, RfDropletSwap *swap);

typedef enum {
    RF_SWAP_TAKEN_OVER, /* the path passed to another droplet */
    RF_SWAP_MERGED,     /* another path ends there and a larger droplet goes on */
} RfSwapKind;

/* What the other paths say of a swap.
 *   partner  set where merged: index of the trail that ends there */
RfSwapKind rf_droplet_swap_kind(const RfTrail *trails, size_t n, size_t droplet, const RfDropletSwap *swap,
                                size_t *partner);
