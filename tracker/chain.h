/* A run of spots believed to be one droplet, and what the motion model makes of it: the state at either end, the
 * likelihood, the smoothed positions in every exposure between. Not for choosing the spots. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "tracker/link_scene.h"

typedef struct {
    GArray *hits;                     /* of RfHit, rising exposure, at least one */
    bool is_cut_before, is_cut_after; /* its neighbour can't be decided */
    double spread_px2_s;              /* 2 D of this droplet; the scene's where it is too short to tell */
} RfChain;

RfChain *rf_chain_new(const RfLinkScene *scene);
void rf_chain_free(RfChain *chain);

unsigned rf_chain_first(const RfChain *chain); /* exposures */
unsigned rf_chain_last(const RfChain *chain);
double rf_chain_start_s(const RfLinkScene *scene, const RfChain *chain);
double rf_chain_end_s(const RfLinkScene *scene, const RfChain *chain);

/* What the chain knows at its last hit (forward) or its first (backward). prior_factor as in rf_motion_start. */
RfMotion rf_chain_end_state(const RfLinkScene *scene, const RfChain *chain, bool is_backward,
                            double prior_factor);

/* Carries a state between two instants. */
void rf_chain_carry(const RfLinkScene *scene, const RfMotionModel *model, RfMotion *motion, double from_s,
                    double to_s);

/* log of the density of all hits but the first, given the hits before. */
double rf_chain_log_likelihood(const RfLinkScene *scene, const RfChain *chain, double spread_px2_s);

/* Sets spread_px2_s to its likeliest value. */
void rf_chain_learn_spread(const RfLinkScene *scene, RfChain *chain);

/* Smoothed place in each exposure from the first hit's to the last's: (returns new) RfSight array, log_peak unused. */
RfSight *rf_chain_smooth(const RfLinkScene *scene, const RfChain *chain);

/* Mean of log_peak over up to n hits from one end. */
double rf_chain_log_peak(const RfLinkScene *scene, const RfChain *chain, bool is_at_end, unsigned n);
