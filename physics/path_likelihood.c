#include "physics/path_likelihood.h"

#include <float.h>
#include <glib.h>
#include <gsl/gsl_linalg.h>
#include <gsl/gsl_matrix.h>
#include <math.h>

/* Product of many small numbers, its logarithm taken now and then: a logarithm per frame would cost more than the
 * filter itself. */
typedef struct {
    double log_sum, product;
    int factors;
} LogProduct;

static void log_product_take(LogProduct *p, double factor)
{
    p->product *= factor;
    if (++p->factors < 8) return; /* 1e-30 m^2 to the 8th still fits a double */
    p->log_sum += log(p->product);
    p->product = 1;
    p->factors = 0;
}

static double log_product_result(const LogProduct *p)
{
    return p->log_sum + log(p->product);
}

/* Local-level filter: the state is the true position alone. */
static bool whiten_white(const RfPathNoise *noise, size_t n, const double *times_s, const double *u_m,
                         size_t m, double *columns, LogProduct *det)
{
    g_autofree double *level = g_new(double, m);
    double variance = u_m[0] * u_m[0] + noise->extra_variance_m2;
    for (size_t j = 0; j < m; j++) {
        level[j] = columns[j];
        columns[j] = 0;
    }
    for (size_t i = 1; i < n; i++) {
        double *row = columns + i * m;
        variance += 2 * noise->diffusion_m2_s * (times_s[i] - times_s[i - 1]);
        double measured = u_m[i] * u_m[i] + noise->extra_variance_m2, innovation = variance + measured;
        if (!(innovation > 0)) return false;
        double gain = variance / innovation, weight = 1 / sqrt(innovation);
        for (size_t j = 0; j < m; j++) {
            double miss = row[j] - level[j];
            level[j] += gain * miss;
            row[j] = miss * weight;
        }
        variance = gain * measured;
        log_product_take(det, innovation);
    }
    return true;
}

/* The state is (true position, error that lives on, in units of its own size). `sign` is the error's variance in these
 * units: -1 where it stands for a running mean; the algebra is the same. */
typedef struct {
    double pp, pe, ee; /* covariance */
} JointCovariance;

static void joint_predict(JointCovariance *c, double growth_m2, double memory, double sign)
{
    c->pp += growth_m2;
    c->pe *= memory;
    c->ee = sign + memory * memory * (c->ee - sign);
}

static bool is_smeared(const RfPathNoise *noise)
{
    return noise->memory.smear_s > 0;
}

/* Size of the lasting part at one sample, metres. */
static double reach_m(const RfPathNoise *noise, double u_m)
{
    return is_smeared(noise) ? sqrt(2 * noise->diffusion_m2_s * noise->memory.smear_s)
                             : u_m * sqrt(noise->memory.share);
}

/* What is left of a sample's variance for the white part. c is free, so it takes up what smearing takes away. */
static double white_m2(const RfPathNoise *noise, double u_m)
{
    double white_share = is_smeared(noise) ? 1 : 1 - noise->memory.share;
    return u_m * u_m * white_share + noise->extra_variance_m2;
}

static bool whiten_with_memory(const RfPathNoise *noise, size_t n, const double *times_s, const double *u_m,
                               size_t m, double *columns, LogProduct *det)
{
    g_autofree double *level = g_new(double, 2 * m);
    const double sign = is_smeared(noise) ? -1 : 1, first = reach_m(noise, u_m[0]);
    double *lasting = level + m;
    /* Position = first measurement less both errors. */
    JointCovariance c = {white_m2(noise, u_m[0]) + sign * first * first, -sign * first, sign};
    for (size_t j = 0; j < m; j++) {
        level[j] = columns[j];
        lasting[j] = columns[j] = 0;
    }
    for (size_t i = 1; i < n; i++) {
        double *row = columns + i * m, dt = times_s[i] - times_s[i - 1],
               memory = exp(-dt / noise->memory.memory_s);
        joint_predict(&c, 2 * noise->diffusion_m2_s * dt, memory, sign);
        double h = reach_m(noise, u_m[i]), p = c.pp + h * c.pe, e = c.pe + h * c.ee;
        double innovation = p + h * e + white_m2(noise, u_m[i]);
        if (!(innovation > 0)) return false;
        double gain_p = p / innovation, gain_e = e / innovation, weight = 1 / sqrt(innovation);
        for (size_t j = 0; j < m; j++) {
            lasting[j] *= memory;
            double miss = row[j] - level[j] - h * lasting[j];
            level[j] += gain_p * miss;
            lasting[j] += gain_e * miss;
            row[j] = miss * weight;
        }
        c = (JointCovariance){c.pp - gain_p * p, c.pe - gain_p * e, c.ee - gain_e * e};
        log_product_take(det, innovation);
    }
    return true;
}

bool rf_path_likelihood_whiten(const RfPathNoise *noise, size_t n, const double *times_s, const double *u_m,
                               size_t m, double *columns, double *log_det)
{
    LogProduct det = {0, 1, 0};
    if (n == 0 || m == 0) return false;
    bool is_white = !(noise->memory.share > 0) && !is_smeared(noise);
    bool fine = !is_white ? whiten_with_memory(noise, n, times_s, u_m, m, columns, &det)
                          : whiten_white(noise, n, times_s, u_m, m, columns, &det);
    if (!fine) return false;
    *log_det = log_product_result(&det);
    return isfinite(*log_det);
}

static void gram(size_t n, size_t m, const double *columns, double *sums)
{
    for (size_t k = 0; k < m * m; k++) sums[k] = 0;
    for (size_t i = 0; i < n; i++) {
        const double *row = columns + i * m;
        for (size_t j = 0; j < m; j++)
            for (size_t k = j; k < m; k++) sums[j * m + k] += row[j] * row[k];
    }
}

/* Information of the regressors scaled to a unit diagonal, so that "degenerate" doesn't depend on units; inverted in
 * place. */
static bool invert_scaled(double *matrix, const double *scale, size_t p, double *log_det)
{
    gsl_matrix_view view = gsl_matrix_view_array(matrix, p, p);
    if (gsl_linalg_cholesky_decomp1(&view.matrix) != 0) return false;
    *log_det = 0;
    for (size_t j = 0; j < p; j++) {
        double pivot = matrix[j * p + j];
        if (!(pivot > 1e-5)) return false; /* collinear but for rounding */
        *log_det += 2 * (log(pivot) + log(scale[j]));
    }
    return gsl_linalg_cholesky_invert(&view.matrix) == 0;
}

bool rf_path_likelihood_solve(size_t n, size_t m, const double *columns, double *coefficients,
                              double *covariance, double *rest, double *log_det_information)
{
    g_autofree double *sums = g_new(double, m *m + m);
    double *scale = sums + m * m;
    size_t p = m - 1;
    gram(n, m, columns, sums);
    *rest = sums[0];
    *log_det_information = 0;
    if (p == 0) return true;
    for (size_t j = 0; j < p; j++) {
        scale[j] = sqrt(sums[(j + 1) * m + j + 1]);
        if (!(scale[j] > DBL_MIN)) return false;
    }
    for (size_t j = 0; j < p; j++)
        for (size_t k = 0; k < p; k++)
            covariance[j * p + k] = sums[(MIN(j, k) + 1) * m + MAX(j, k) + 1] / (scale[j] * scale[k]);
    if (!invert_scaled(covariance, scale, p, log_det_information)) return false;
    for (size_t j = 0; j < p; j++) {
        coefficients[j] = 0;
        for (size_t k = 0; k < p; k++) {
            covariance[j * p + k] /= scale[j] * scale[k];
            coefficients[j] += covariance[j * p + k] * sums[k + 1];
        }
        *rest -= coefficients[j] * sums[j + 1];
    }
    return true;
}
