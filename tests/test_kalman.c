#include "tracker/kalman.h"

#include <glib.h>
#include <gsl/gsl_linalg.h>
#include <gsl/gsl_randist.h>
#include <gsl/gsl_rng.h>
#include <math.h>
#include <stdbool.h>

static const RfKalmanNoise still = {0, 0, 0};

static void test_predict_straight(void)
{
    RfKalman k = {.position_px = 10, .velocity_px_s = 3, .response_px_s = -8};
    rf_kalman_predict(&k, 0.5, 0.25, &still);
    g_assert_cmpfloat_with_epsilon(k.position_px, 10 + 1.5 - 2, 1e-12);
    g_assert_cmpfloat(k.velocity_px_s, ==, 3);
    g_assert_cmpfloat(k.pp, ==, 0);
}

static void test_gap_widens(void)
{
    const RfKalmanNoise noise = {8, 2, 3};
    RfKalman once = {.pp = 0.1, .vv = 4, .rr = 9}, twice = once;
    rf_kalman_predict(&once, 0.2, 0.2, &noise);
    g_assert_cmpfloat(once.pp, >, 0.1 + 8 * 0.2);
    rf_kalman_predict(&twice, 0.1, 0.1, &noise);
    rf_kalman_predict(&twice, 0.1, 0.1, &noise);
    /* the noise is that of continuous time: how a gap is cut up doesn't matter */
    g_assert_cmpfloat_with_epsilon(once.pp, twice.pp, 1e-12);
    g_assert_cmpfloat_with_epsilon(once.pv, twice.pv, 1e-12);
    g_assert_cmpfloat_with_epsilon(once.pr, twice.pr, 1e-12);
    g_assert_cmpfloat_with_epsilon(once.vv, twice.vv, 1e-12);
    g_assert_cmpfloat_with_epsilon(once.rr, twice.rr, 1e-12);
}

static void test_predict_backward(void)
{
    RfKalman k = {.position_px = 1,
                  .velocity_px_s = 2,
                  .response_px_s = 5,
                  .pp = 1,
                  .pv = 0.2,
                  .vv = 3,
                  .vr = 0.1,
                  .rr = 2};
    RfKalman there = k;
    rf_kalman_predict(&there, 0.4, 0.3, &still);
    rf_kalman_predict(&there, -0.4, -0.3, &still);
    g_assert_cmpfloat_with_epsilon(there.position_px, k.position_px, 1e-12);
    g_assert_cmpfloat_with_epsilon(there.pp, k.pp, 1e-12);
    g_assert_cmpfloat_with_epsilon(there.pr, k.pr, 1e-12);
    const RfKalmanNoise noise = {8, 2, 3};
    rf_kalman_predict(&k, -0.4, -0.3, &noise);
    g_assert_cmpfloat(k.pp, >, 1 + 8 * 0.4); /* uncertainty grows into the past as well */
}

/* Annual flow of the Nile at Aswan 1871-1970, 1e8 m^3: G. W. Cobb, Biometrika 65 (1978) 243, table 1. */
static const double nile[] = {
    1120, 1160, 963,  1210, 1160, 1160, 813,  1230, 1370, 1140, 995,  935,  1110, 994, 1020, 960,  1180,
    799,  958,  1140, 1100, 1210, 1150, 1250, 1260, 1220, 1030, 1100, 774,  840,  874, 694,  940,  833,
    701,  916,  692,  1020, 1050, 969,  831,  726,  456,  824,  702,  1120, 1100, 832, 764,  821,  768,
    845,  864,  862,  698,  845,  744,  796,  1040, 759,  781,  865,  845,  944,  984, 897,  822,  1010,
    771,  676,  649,  846,  812,  742,  801,  1040, 860,  874,  848,  890,  744,  749, 838,  1050, 918,
    986,  797,  923,  975,  815,  1020, 906,  901,  1170, 912,  746,  919,  718,  714, 740};
static const double nile_observation = 15098.53, nile_level = 1469.178;

/* Level after each year; the first year starts the filter. Returns the log likelihood of the others. */
static double filter_nile(double observation, double level, double *filtered, double *variance)
{
    const RfKalmanNoise noise = {level, 0, 0};
    RfKalman k = {.position_px = nile[0], .pp = observation};
    double log_likelihood = 0;
    for (size_t i = 0; i < G_N_ELEMENTS(nile); i++) {
        if (i > 0) {
            rf_kalman_predict(&k, 1, 0, &noise);
            double s = k.pp + observation;
            log_likelihood -= (log(2 * G_PI * s) + pow(nile[i] - k.position_px, 2) / s) / 2;
            rf_kalman_update(&k, nile[i], observation);
        }
        filtered[i] = k.position_px;
        variance[i] = k.pp;
    }
    return log_likelihood;
}

/* Local-level model of the Nile. Log likelihood -632.5456 with variances 15098.53 and 1469.178: test file of a state-space
 * package (public). Levels and variances: recomputed from these, to the digits given. */
static void test_nile(void)
{
    double filtered[100], variance[100];
    double log_likelihood = filter_nile(nile_observation, nile_level, filtered, variance);
    g_assert_cmpfloat_with_epsilon(log_likelihood, -632.5456, 5e-5);
    g_assert_cmpfloat_with_epsilon(filtered[1], 1140.9279, 5e-5);
    g_assert_cmpfloat_with_epsilon(filtered[2], 1072.7979, 5e-5);
    g_assert_cmpfloat_with_epsilon(filtered[99], 798.3673, 5e-4);
    g_assert_cmpfloat_with_epsilon(variance[1], 7899.5186, 5e-4);
    g_assert_cmpfloat_with_epsilon(variance[99], 4032.1761, 5e-4);
}

/* The same variances are the likeliest ones: published 15098.53 and 1469.178 (same source). */
static void test_nile_likeliest(void)
{
    double filtered[100], variance[100];
    double best = filter_nile(nile_observation, nile_level, filtered, variance);
    for (int i = 0; i < 4; i++) {
        double o = nile_observation * (i == 0 ? 1.02 : i == 1 ? 0.98 : 1);
        double l = nile_level * (i == 2 ? 1.05 : i == 3 ? 0.95 : 1);
        g_assert_cmpfloat(filter_nile(o, l, filtered, variance), <, best);
    }
}

/* Steady gains of the constant-velocity filter with piecewise constant acceleration: P. R. Kalata, IEEE Trans. AES 20 (1984)
 * 174; values derived from its closed form. */
static void test_steady_gains(void)
{
    static const double table[][3] = {
        {0.1, 0.36, 0.08}, {0.5, 0.62837346, 0.30480590}, {1.0, 0.75, 0.5}, {2.0, 0.85410197, 0.76393202}};
    for (size_t i = 0; i < G_N_ELEMENTS(table); i++) {
        double t = 0.04, sv = 0.3, sw = table[i][0] * sv / (t * t), alpha = 0, beta = 0;
        RfKalman k = {.pp = 1, .vv = 100};
        for (int step = 0; step < 2000; step++) {
            rf_kalman_predict(&k, t, 0, &still);
            k.pp += sw * sw * pow(t, 4) / 4;
            k.pv += sw * sw * pow(t, 3) / 2;
            k.vv += sw * sw * t * t;
            alpha = k.pp / (k.pp + sv * sv);
            beta = k.pv / (k.pp + sv * sv) * t;
            rf_kalman_update(&k, 0, sv * sv);
        }
        g_assert_cmpfloat_with_epsilon(alpha, table[i][1], 5e-9);
        g_assert_cmpfloat_with_epsilon(beta, table[i][2], 5e-9);
    }
}

static void test_update_exact(void)
{
    RfKalman k = {.position_px = 1, .velocity_px_s = 1, .pp = 2, .pv = 1, .vv = 2};
    rf_kalman_update(&k, 5, 0);
    g_assert_cmpfloat_with_epsilon(k.position_px, 5, 1e-12);
    g_assert_cmpfloat(k.pp, ==, 0);
    g_assert_cmpfloat_with_epsilon(k.velocity_px_s, 1 + 0.5 * 4, 1e-12);
}

static void test_loosen(void)
{
    RfKalman k = {.pp = 1, .vv = 1, .rr = 1};
    rf_kalman_loosen(&k, 12, 3, 0.5, 0.5);
    g_assert_cmpfloat_with_epsilon(k.pp, 1 + (12 + 3) * 0.25 / 3, 1e-12);
    g_assert_cmpfloat_with_epsilon(k.vv, 13, 1e-12);
    g_assert_cmpfloat_with_epsilon(k.rr, 4, 1e-12);
}

enum { steps_n = 40 };

/* Filters a made-up path with gaps and a switching field, keeping what the smoother needs. */
static void record(RfKalmanStep *steps, double *measured_px, double *variance_px2)
{
    const RfKalmanNoise noise = {7, 3, 2};
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, 5);
    RfKalman k = {.pp = 400, .vv = 900, .rr = 1600};
    for (int i = 0; i < steps_n; i++) {
        double dt_s = i == 0 ? 0 : 0.02 + 0.03 * gsl_rng_uniform(random), field_s = i % 15 < 7 ? dt_s : 0;
        if (i > 0) rf_kalman_predict(&k, dt_s, field_s, &noise);
        measured_px[i] = gsl_ran_gaussian(random, 5);
        variance_px2[i] = i % 9 > 5 ? -1 : 0.1 + gsl_rng_uniform(random);
        steps[i] = (RfKalmanStep){k, field_s, dt_s, measured_px[i], variance_px2[i]};
        if (variance_px2[i] >= 0) rf_kalman_update(&k, measured_px[i], variance_px2[i]);
    }
    gsl_rng_free(random);
}

/* The prior covariance of all positions at once, built from the model's own steps. */
static void joint_prior(const RfKalmanStep *steps, gsl_matrix *prior)
{
    const RfKalmanNoise noise = {7, 3, 2};
    RfKalman k = {.pp = 400, .vv = 900, .rr = 1600};
    for (int i = 0; i < steps_n; i++) {
        if (i > 0) rf_kalman_predict(&k, steps[i].dt_s, steps[i].field_s, &noise);
        double ahead_s = 0, field_s = 0;
        for (int j = i; j < steps_n; j++) {
            if (j > i) {
                ahead_s += steps[j].dt_s;
                field_s += steps[j].field_s;
            }
            gsl_matrix_set(prior, (size_t)i, (size_t)j, k.pp + ahead_s * k.pv + field_s * k.pr);
            gsl_matrix_set(prior, (size_t)j, (size_t)i, k.pp + ahead_s * k.pv + field_s * k.pr);
        }
    }
}

/* The smoother against conditioning the joint normal distribution of all positions on all measurements by Cholesky. */
static void test_smooth_as_joint(void)
{
    RfKalmanStep steps[steps_n];
    double measured_px[steps_n], variance_px2[steps_n], smooth_px[steps_n], smooth_px2[steps_n];
    record(steps, measured_px, variance_px2);
    rf_kalman_smooth(steps, steps_n, smooth_px, smooth_px2);

    gsl_matrix *prior = gsl_matrix_calloc(steps_n, steps_n), *s = gsl_matrix_calloc(steps_n, steps_n);
    gsl_vector *z = gsl_vector_calloc(steps_n), *row = gsl_vector_calloc(steps_n),
               *w = gsl_vector_calloc(steps_n);
    joint_prior(steps, prior);
    gsl_matrix_memcpy(s, prior);
    for (size_t i = 0; i < steps_n; i++) {
        bool is_seen = variance_px2[i] >= 0;
        gsl_vector_set(z, i, is_seen ? measured_px[i] : 0);
        gsl_matrix_set(s, i, i,
                       gsl_matrix_get(s, i, i) + (is_seen ? variance_px2[i] : 1e9)); /* as good as unseen */
    }
    g_assert_cmpint(gsl_linalg_cholesky_decomp1(s), ==, 0);
    for (size_t i = 0; i < steps_n; i++) {
        gsl_matrix_get_row(row, prior, i);
        gsl_linalg_cholesky_solve(s, row, w);
        double mean = 0, variance = gsl_matrix_get(prior, i, i);
        for (size_t j = 0; j < steps_n; j++) {
            mean += gsl_vector_get(w, j) * gsl_vector_get(z, j);
            variance -= gsl_vector_get(w, j) * gsl_vector_get(row, j);
        }
        g_assert_cmpfloat_with_epsilon(smooth_px[i], mean, 1e-4);
        g_assert_cmpfloat_with_epsilon(smooth_px2[i], variance, 1e-4);
    }
    gsl_matrix_free(prior);
    gsl_matrix_free(s);
    gsl_vector_free(z);
    gsl_vector_free(row);
    gsl_vector_free(w);
}

static void test_smooth_never_worse(void)
{
    RfKalmanStep steps[steps_n];
    double measured_px[steps_n], variance_px2[steps_n], smooth_px[steps_n], smooth_px2[steps_n];
    record(steps, measured_px, variance_px2);
    rf_kalman_smooth(steps, steps_n, smooth_px, smooth_px2);
    for (int i = 0; i < steps_n; i++) {
        g_assert_cmpfloat(smooth_px2[i], <=, steps[i].predicted.pp + 1e-9);
        if (variance_px2[i] >= 0) g_assert_cmpfloat(smooth_px2[i], <, variance_px2[i]);
    }
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    gsl_set_error_handler_off();
    g_test_add_func("/kalman/predict/straight", test_predict_straight);
    g_test_add_func("/kalman/predict/gap-widens-covariance", test_gap_widens);
    g_test_add_func("/kalman/predict/backward", test_predict_backward);
    g_test_add_func("/kalman/loosen/adds-variance", test_loosen);
    g_test_add_func("/kalman/update/exact-measurement", test_update_exact);
    g_test_add_func("/kalman/update/nile", test_nile);
    g_test_add_func("/kalman/update/nile-likeliest-variances", test_nile_likeliest);
    g_test_add_func("/kalman/update/steady-gains", test_steady_gains);
    g_test_add_func("/kalman/smooth/as-joint-distribution", test_smooth_as_joint);
    g_test_add_func("/kalman/smooth/never-worse-than-filter", test_smooth_never_worse);
    return g_test_run();
}
