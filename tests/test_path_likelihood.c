#include "physics/path_likelihood.h"

#include <glib.h>
#include <gsl/gsl_errno.h>
#include <gsl/gsl_linalg.h>
#include <gsl/gsl_randist.h>
#include <gsl/gsl_rng.h>
#include <math.h>

enum { N = 40 };

typedef struct {
    double times_s[N], u_m[N], data_m[N], regressor[N];
} Path;

/* Uneven times with gaps, uneven uncertainties; any numbers will do as data. */
static Path uneven_path(void)
{
    Path p;
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, 7);
    for (int i = 0; i < N; i++) {
        p.times_s[i] =
            (i > 0 ? p.times_s[i - 1] : 0) + 0.02 + 0.05 * gsl_rng_uniform(random) + (i == 20 ? 0.7 : 0);
        p.u_m[i] = 0.2e-6 + 0.4e-6 * gsl_rng_uniform(random);
        p.data_m[i] = gsl_ran_gaussian(random, 3e-6);
        p.regressor[i] = p.times_s[i] + 0.3 * sin(i);
    }
    gsl_rng_free(random);
    return p;
}

static double position_covariance(const RfPathNoise *noise, const Path *p, int i, int j)
{
    double brownian = 2 * noise->diffusion_m2_s * fmin(p->times_s[i], p->times_s[j]);
    double share = noise->memory.share, lasting = 0;
    if (share > 0)
        lasting = share * p->u_m[i] * p->u_m[j];
    else if (noise->memory.smear_s > 0)
        lasting = -2 * noise->diffusion_m2_s * noise->memory.smear_s;
    if (lasting != 0)
        lasting *= exp(-fabs(p->times_s[i] - p->times_s[j]) / noise->memory.memory_s);
    double white = i == j ? p->u_m[i] * p->u_m[i] * (1 - share) + noise->extra_variance_m2 : 0;
    return brownian + lasting + white;
}

/* Covariance of the increments, written out whole: the oracle. */
static gsl_matrix *increment_covariance(const RfPathNoise *noise, const Path *p)
{
    gsl_matrix *c = gsl_matrix_alloc(N - 1, N - 1);
    for (int i = 0; i + 1 < N; i++)
        for (int j = 0; j + 1 < N; j++)
            gsl_matrix_set(c, (size_t)i, (size_t)j,
                           position_covariance(noise, p, i + 1, j + 1) -
                               position_covariance(noise, p, i, j + 1) -
                               position_covariance(noise, p, i + 1, j) + position_covariance(noise, p, i, j));
    return c;
}

/* x' C^-1 y over increments. */
static double dense_product(const gsl_matrix *cholesky, const double *x, const double *y)
{
    gsl_vector *dx = gsl_vector_alloc(N - 1), *dy = gsl_vector_alloc(N - 1);
    double sum = 0;
    for (size_t i = 0; i + 1 < N; i++) {
        gsl_vector_set(dx, i, x[i + 1] - x[i]);
        gsl_vector_set(dy, i, y[i + 1] - y[i]);
    }
    gsl_linalg_cholesky_svx(cholesky, dx);
    for (size_t i = 0; i + 1 < N; i++) sum += gsl_vector_get(dx, i) * gsl_vector_get(dy, i);
    gsl_vector_free(dx);
    gsl_vector_free(dy);
    return sum;
}

static void compare_with_dense(const RfPathNoise *noise)
{
    Path p = uneven_path();
    double columns[2 * N], log_det, dense_log_det = 0;
    for (int i = 0; i < N; i++) {
        columns[2 * i] = p.data_m[i];
        columns[2 * i + 1] = p.regressor[i];
    }
    g_assert_true(rf_path_likelihood_whiten(noise, N, p.times_s, p.u_m, 2, columns, &log_det));
    gsl_matrix *c = increment_covariance(noise, &p);
    g_assert_cmpint(gsl_linalg_cholesky_decomp1(c), ==, 0);
    for (size_t i = 0; i + 1 < N; i++) dense_log_det += 2 * log(gsl_matrix_get(c, i, i));
    g_assert_cmpfloat_with_epsilon(log_det, dense_log_det, 1e-9 * fabs(dense_log_det));
    double yy = dense_product(c, p.data_m, p.data_m), xy = dense_product(c, p.regressor, p.data_m);
    double xx = dense_product(c, p.regressor, p.regressor), coefficient, variance, rest, log_det_information;
    g_assert_true(
        rf_path_likelihood_solve(N, 2, columns, &coefficient, &variance, &rest, &log_det_information));
    g_assert_cmpfloat_with_epsilon(coefficient, xy / xx, 1e-9 * fabs(xy / xx));
    g_assert_cmpfloat_with_epsilon(variance, 1 / xx, 1e-9 / xx);
    g_assert_cmpfloat_with_epsilon(rest, yy - xy * xy / xx, 1e-9 * yy);
    g_assert_cmpfloat_with_epsilon(log_det_information, log(xx), 1e-9 * fabs(log(xx)));
    gsl_matrix_free(c);
}

static void test_white_as_dense(void)
{
    compare_with_dense(&(RfPathNoise){.diffusion_m2_s = 2.4e-11, .extra_variance_m2 = 1e-13});
}

/* Blur takes away more than noise adds: -2 R D dt with R = 1/6 outweighs u^2. */
static void test_negative_noise_as_dense(void)
{
    compare_with_dense(&(RfPathNoise){.diffusion_m2_s = 6e-11, .extra_variance_m2 = -2.5e-13});
}

static void test_memory_as_dense(void)
{
    compare_with_dense(
        &(RfPathNoise){.diffusion_m2_s = 1e-11, .extra_variance_m2 = 2e-14, .memory = {.share = 0.8, .memory_s = 0.15}});
    compare_with_dense(
        &(RfPathNoise){.diffusion_m2_s = 1e-11, .extra_variance_m2 = 3e-13, .memory = {.share = 1.7, .memory_s = 0.05}});
}

/* A running mean: the lasting part has a negative variance. */
static void test_smear_as_dense(void)
{
    compare_with_dense(&(RfPathNoise){.diffusion_m2_s = 2e-11,
                                      .extra_variance_m2 = 2e-13,
                                      .memory = {.smear_s = 0.004, .memory_s = 0.06}});
}

static void test_short_memory_is_white(void)
{
    Path p = uneven_path();
    double white[N], forgetful[N], log_det_white, log_det_forgetful;
    for (int i = 0; i < N; i++) white[i] = forgetful[i] = p.data_m[i];
    RfPathNoise noise = {.diffusion_m2_s = 2e-11, .extra_variance_m2 = 1e-13};
    g_assert_true(rf_path_likelihood_whiten(&noise, N, p.times_s, p.u_m, 1, white, &log_det_white));
    noise.memory = (RfNoiseMemory){.share = 0.9, .memory_s = 1e-5};
    g_assert_true(rf_path_likelihood_whiten(&noise, N, p.times_s, p.u_m, 1, forgetful, &log_det_forgetful));
    g_assert_cmpfloat_with_epsilon(log_det_white, log_det_forgetful, 1e-9);
    for (int i = 0; i < N; i++) g_assert_cmpfloat_with_epsilon(white[i], forgetful[i], 1e-9);
}

static void test_impossible_noise_refused(void)
{
    Path p = uneven_path();
    double log_det, column[N];
    for (int i = 0; i < N; i++) column[i] = p.data_m[i];
    RfPathNoise noise = {.diffusion_m2_s = 1e-12, .extra_variance_m2 = -1e-12};
    g_assert_false(rf_path_likelihood_whiten(&noise, N, p.times_s, p.u_m, 1, column, &log_det));
}

static void test_degenerate_regressors_refused(void)
{
    double columns[3 * N], coefficient[2], covariance[4], rest, log_det;
    for (int i = 0; i < N; i++) {
        columns[3 * i] = i % 3;
        columns[3 * i + 1] = i;
        columns[3 * i + 2] = 5.0 * i;
    }
    g_assert_false(rf_path_likelihood_solve(N, 3, columns, coefficient, covariance, &rest, &log_det));
}

/* Annual flow of the Nile at Aswan, 1871 to 1970, 1e8 m^3 (G. W. Cobb, Biometrika 65 (1978) 243, table 1). */
static const double NILE[] = {
    1120, 1160, 963,  1210, 1160, 1160, 813,  1230, 1370, 1140, 995,  935,  1110, 994, 1020, 960,  1180,
    799,  958,  1140, 1100, 1210, 1150, 1250, 1260, 1220, 1030, 1100, 774,  840,  874, 694,  940,  833,
    701,  916,  692,  1020, 1050, 969,  831,  726,  456,  824,  702,  1120, 1100, 832, 764,  821,  768,
    845,  864,  862,  698,  845,  744,  796,  1040, 759,  781,  865,  845,  944,  984, 897,  822,  1010,
    771,  676,  649,  846,  812,  742,  801,  1040, 860,  874,  848,  890,  744,  749, 838,  1050, 918,
    986,  797,  923,  975,  815,  1020, 906,  901,  1170, 912,  746,  919,  718,  714, 740};

/* Local-level model at H = 15098.53, Q = 1469.178: log-likelihood -632.5456, as a state-space package's test file
 * prints it (J. Durbin, S. J. Koopman, Time Series Analysis by State Space Methods, use the same series and values). */
static void test_nile_log_likelihood(void)
{
    double times[100], u[100], column[100], log_det, sum = 0;
    g_assert_cmpuint(G_N_ELEMENTS(NILE), ==, 100);
    for (int i = 0; i < 100; i++) {
        times[i] = i;
        u[i] = sqrt(15098.53);
        column[i] = NILE[i];
    }
    RfPathNoise noise = {.diffusion_m2_s = 1469.178 / 2};
    g_assert_true(rf_path_likelihood_whiten(&noise, 100, times, u, 1, column, &log_det));
    for (int i = 0; i < 100; i++) sum += column[i] * column[i];
    g_assert_cmpfloat_with_epsilon(-0.5 * (log_det + sum + 99 * log(2 * M_PI)), -632.5456, 5e-5);
}

static double log_likelihood(double diffusion, double noise_m2, size_t n, const double *times,
                             const double *u, const double *data)
{
    double *column = g_memdup2(data, n * sizeof *data), log_det, sum = 0;
    RfPathNoise noise = {.diffusion_m2_s = diffusion, .extra_variance_m2 = noise_m2};
    g_assert_true(rf_path_likelihood_whiten(&noise, n, times, u, 1, column, &log_det));
    for (size_t i = 0; i < n; i++) sum += column[i] * column[i];
    g_free(column);
    return -0.5 * (log_det + sum);
}

/* Relative sd of D from the mean curvature over simulated paths, the noise unknown. */
static double curvature_bound(size_t increments, double x, double blur)
{
    enum { PATHS = 150, BLUR_STEPS = 24 };
    size_t n = increments + 1;
    double h = 0.02, k = 0.02, dd = 0, dn = 0, nn = 0, c = x - 2 * blur;
    g_autofree double *times = g_new(double, n), *u = g_new0(double, n), *data = g_new(double, n);
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, 5);
    for (int p = 0; p < PATHS; p++) {
        double place = 0;
        for (size_t i = 0; i < n; i++) {
            double sum = 0;
            for (int s = 0; s < BLUR_STEPS; s++) {
                place += gsl_ran_gaussian(random, sqrt(2.0 / BLUR_STEPS));
                sum += place;
            }
            times[i] = (double)i;
            data[i] = (blur > 0 ? sum / BLUR_STEPS : place) + gsl_ran_gaussian(random, sqrt(x));
        }
        double f[3][3];
        for (int a = 0; a < 3; a++)
            for (int b = 0; b < 3; b++)
                f[a][b] = log_likelihood(1 + h * (a - 1), c + k * (b - 1), n, times, u, data);
        dd -= (f[2][1] - 2 * f[1][1] + f[0][1]) / (h * h) / PATHS;
        nn -= (f[1][2] - 2 * f[1][1] + f[1][0]) / (k * k) / PATHS;
        dn -= (f[2][2] - f[2][0] - f[0][2] + f[0][0]) / (4 * h * k) / PATHS;
    }
    gsl_rng_free(random);
    return 1 / sqrt(dd - dn * dn / nn);
}

/* Bounds on sd(D)/D with unknown noise, D = dt = 1, from the exact covariance of the displacements (A. J. Berglund,
 * Phys. Rev. E 82 (2010) 011917; X. Michalet, A. J. Berglund, Phys. Rev. E 85 (2012) 061916; values derived with a
 * dense matrix). 6 % for the sampling of 150 paths. */
static void test_curvature_reaches_known_bounds(void)
{
    static const struct {
        size_t increments;
        double x, blur, bound;
    } cases[] = {{100, 0.25, 0, 0.26381},
                 {100, 1, 0, 0.30083},
                 {200, 0.25, 1.0 / 6, 0.16835},
                 {200, 1, 1.0 / 6, 0.20195}};
    for (size_t i = 0; i < G_N_ELEMENTS(cases); i++) {
        double found = curvature_bound(cases[i].increments, cases[i].x, cases[i].blur);
        g_test_message("N=%zu x=%.2f R=%.3f: %.4f, bound %.4f", cases[i].increments, cases[i].x,
                       cases[i].blur, found, cases[i].bound);
        g_assert_cmpfloat_with_epsilon(found, cases[i].bound, 0.06 * cases[i].bound);
    }
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/path-likelihood/whiten/short-memory-is-white", test_short_memory_is_white);
    g_test_add_func("/path-likelihood/whiten/nile-local-level", test_nile_log_likelihood);
    g_test_add_func("/path-likelihood/whiten/curvature-reaches-known-bounds",
                    test_curvature_reaches_known_bounds);
    g_test_add_func("/path-likelihood/whiten/white-as-dense", test_white_as_dense);
    g_test_add_func("/path-likelihood/whiten/negative-noise-as-dense", test_negative_noise_as_dense);
    g_test_add_func("/path-likelihood/whiten/memory-as-dense", test_memory_as_dense);
    g_test_add_func("/path-likelihood/whiten/smear-as-dense", test_smear_as_dense);
    g_test_add_func("/path-likelihood/whiten/impossible-noise-refused", test_impossible_noise_refused);
    g_test_add_func("/path-likelihood/solve/degenerate-regressors-refused",
                    test_degenerate_regressors_refused);
    return g_test_run();
}
