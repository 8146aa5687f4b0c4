/* Exact Gaussian likelihood of one axis of a droplet's path: drift + Brownian motion + localisation noise, with uneven
 * times, gaps and a different uncertainty for every position. Not for what the drift means (droplet_fit.h).
 *
 * Model: y_i = m(t_i) + B(t_i) + n_i. B is Brownian, variance 2 D dt per step; the n_i have variance u_i^2 + c. The
 * one free number c stands for s^2 - u^2 - 2 R D dt, blur by the exposure included, since blur and noise enter the
 * covariance of increments only so (A. J. Berglund, Phys. Rev. E 82 (2010) 011917): c may be negative.
 * Footage squeezed by an encoder has errors that live on from frame to frame; a share of u_i^2 may therefore be taken
 * as a first-order autoregressive process.
 * The start of the path is unknown with a flat prior; the mean is linear in unknown coefficients, so that likelihood,
 * generalised least squares and score tests all follow from whitened columns. Kalman form, O(n) per column. */
#pragma once

#include <stdbool.h>
#include <stddef.h>

/* Recording-wide memory of the localisation error, of one of two kinds. All zero: white.
 * Errors that are handed on add a lasting part of variance share u_i^2. A picture that keeps something of its neighbours
 * (an encoder's prediction from before and after) shows a running mean of the motion instead: its error goes against
 * the steps, and enters the covariance like a lasting part of *negative* variance, -2 D smear_s, just as blur within one
 * exposure enters c. Only one of the two may be set. */
typedef struct {
    double share;    /* part of u_i^2 that lives on; >= 0, may exceed 1 where u_i is stated too small. Unitless */
    double memory_s; /* correlation falls as exp(-dt/memory_s); > 0 where share or smear_s is */
    double smear_s;  /* >= 0 */
} RfNoiseMemory;

typedef struct {
    double diffusion_m2_s;    /* > 0 */
    double extra_variance_m2; /* c above; may be negative */
    RfNoiseMemory memory;
} RfPathNoise;

/* Whitens m columns of n rows, row-major (column j of row i at columns[i*m + j]), in place: row 0 becomes zero (it
 * fixes the unknown start), row i the innovation over its standard deviation, so that sums of products over rows are
 * products under the inverse covariance. A column of data and columns of regressors go through alike.
 *   times_s      n, ascending, strictly
 *   u_m          n, >= 0
 *   log_det      logarithm of the determinant of the innovations' covariance
 *   returns      false where these noise parameters are impossible (a covariance that isn't positive) */
bool rf_path_likelihood_whiten(const RfPathNoise *noise, size_t n, const double *times_s, const double *u_m,
                               size_t m, double *columns, double *log_det);

/* Generalised least squares on whitened columns: column 0 is the data, the other m-1 the regressors.
 *   coefficients   m-1
 *   covariance     (m-1)^2, row-major
 *   rest           sum of squares that remains
 *   log_det_information  of the regressors, for the likelihood with coefficients integrated out
 *   returns        false where the regressors are degenerate */
bool rf_path_likelihood_solve(size_t n, size_t m, const double *columns, double *coefficients,
                              double *covariance, double *rest, double *log_det_information);
