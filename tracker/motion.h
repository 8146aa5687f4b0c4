/* How one droplet is expected to move, in square pixels of the reference picture: two filters (across x and y) that share
 * a Brownian spread, and the hypothesis that its velocity or response changed since it was last seen.
 * Not for deciding whose spot is whose. Pure; safe from any thread. */
#pragma once

#include <stdbool.h>

#include "tracker/kalman.h"

/* One spot, ready for linking. */
typedef struct {
    double at_px[2]; /* x, y: square pixels of the reference picture */
    double variance_px2[2];
    double log_peak; /* natural logarithm of the brightness in grey levels */
} RfSight;

typedef struct {
    RfKalmanNoise noise;
    double
        velocity_sd_px_s[2]; /* of droplets at large, per axis: what is expected of one never seen before */
    double response_sd_px_s[2]; /* 0 where the field is unknown */
    double change_cost; /* > 0: -log of the chance that response (field known and on) or velocity (otherwise)
                                   changes between two exposures */
} RfMotionModel;

typedef struct {
    RfKalman axis[2];
    double unseen_s, unseen_field_s; /* time and field integral since the last measurement */
} RfMotion;

/* A droplet first seen here. prior_factor widens what is expected of its velocity and response: 1 for a prior; large where
 * the result is to carry the measurements alone. */
void rf_motion_start(RfMotion *m, const RfMotionModel *model, const RfSight *sight, double prior_factor);

void rf_motion_predict(RfMotion *m, const RfMotionModel *model, double dt_s, double field_s);

/* -log of the density (per px^2) of seeing it there; is_changed tells which hypothesis makes it likelier (the cost of a
 * change is included). is_changed may be NULL. */
double rf_motion_surprise(const RfMotion *m, const RfMotionModel *model, const RfSight *sight,
                          bool *is_changed);

/* Half the width of the window outside which a surprise of `limit` can't be met, per axis. */
void rf_motion_reach(const RfMotion *m, const RfMotionModel *model, double limit, double reach_px[2]);

/* Admits the change, then takes in the measurement. */
void rf_motion_loosen(RfMotion *m, const RfMotionModel *model);
void rf_motion_update(RfMotion *m, const RfSight *sight);

/* log of p(what b knows | it is the droplet of a) / p(what b knows | any other droplet, its place known per unit area).
 * a: carried to the instant of b; b: filtered from its own far end with a large prior factor. may_change admits the change. */
double rf_motion_likeness(const RfMotion *a, const RfMotion *b, const RfMotionModel *model, bool may_change);
