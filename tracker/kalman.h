/* Linear filter and fixed-interval smoother for one coordinate of one droplet. Pure arithmetic: what counts
 * as a measurement, and of which droplet, is decided elsewhere. Safe from any thread.
 *
 * State: position, velocity without field, and response (what a field of state +1 adds to the velocity). Over
 * an interval dt with field integral F: position += velocity dt + response F. Across and along gravity don't
 * mix (the spots' errors are taken as uncorrelated between the axes, diffusion is the same in every
 * direction), so a droplet is two such filters: a tenth of the arithmetic of a joint one.
 *
 * Units: px, s; dt may be negative (a filter run from the end backwards).
 * Source: R. E. Kalman, J. Basic Eng. 82 (1960) 35. Smoother: G. J. Bierman, Int. J. Control 18 (1973) 1
 * (modified Bryson-Frazier form): equal to Rauch-Tung-Striebel's, but needs no inverse where a variance is
 * zero. */
#pragma once

#include <stddef.h>

typedef struct {
    double position_px, velocity_px_s, response_px_s;
    /* covariance: p position, v velocity, r response */
    double pp, pv, pr, vv, vr, rr;
} RfKalman;

/* How uncertainty grows between measurements. */
typedef struct {
    double spread_px2_s;    /* Brownian: 2 D, >= 0 */
    double wander_px2_s3;   /* growth of the velocity's variance (slow drift of the air), >= 0 */
    double response_px2_s3; /* the same of the response's, while the field is on, >= 0 */
} RfKalmanNoise;

/* One step of a filter, as the smoother needs it. */
typedef struct {
    RfKalman predicted; /* before the measurement, after any loosening */
    double field_s;     /* field integral and time that led here from the step before */
    double dt_s;
    double measured_px, variance_px2; /* variance < 0: nothing measured in this step */
} RfKalmanStep;

void rf_kalman_predict(RfKalman *k, double dt_s, double field_s, const RfKalmanNoise *noise);

/* Admit that velocity or response may have changed at an unknown moment within the last dt_s. Variances are
 * added. */
void rf_kalman_loosen(RfKalman *k, double velocity_px2_s2, double response_px2_s2, double dt_s,
                      double field_s);

/* Takes in a measured position. variance_px2 >= 0; the sum with the predicted variance must be > 0. */
void rf_kalman_update(RfKalman *k, double measured_px, double variance_px2);

/* Smoothed position and its variance for each of n steps, first to last. */
void rf_kalman_smooth(const RfKalmanStep *steps, size_t n, double *position_px, double *variance_px2);
