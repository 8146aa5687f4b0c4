#include "physics/common_mean.h"

#include <gsl/gsl_cdf.h>
#include <gsl/gsl_errno.h>
#include <gsl/gsl_linalg.h>
#include <math.h>

#include "physics/physics_error.h"

/* V^-1 (returns new), or NULL. */
static gsl_matrix *precision_of(const double *own_sigma, const double *common, size_t n, GError **error)
{
    gsl_matrix *matrix = gsl_matrix_alloc(n, n);
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < n; j++)
            gsl_matrix_set(matrix, i, j, common[i * n + j] + (i == j ? own_sigma[i] * own_sigma[i] : 0.0));
    if (gsl_linalg_cholesky_decomp1(matrix) == GSL_SUCCESS &&
        gsl_linalg_cholesky_invert(matrix) == GSL_SUCCESS)
        return matrix;
    gsl_matrix_free(matrix);
    g_set_error(error, RF_PHYSICS_ERROR, RF_PHYSICS_ERROR_RANGE,
                "covariance of %zu values isn't positive definite; sigmas of their own above 0 are needed",
                n);
    return NULL;
}

static double row_sum(const gsl_matrix *matrix, size_t row)
{
    double sum = 0.0;
    for (size_t j = 0; j < matrix->size2; j++) sum += gsl_matrix_get(matrix, row, j);
    return sum;
}

/* Element of V^-1 (x - mean). */
static double pull_of(const gsl_matrix *precision, size_t row, const double *values, double mean)
{
    double sum = 0.0;
    for (size_t j = 0; j < precision->size2; j++)
        sum += gsl_matrix_get(precision, row, j) * (values[j] - mean);
    return sum;
}

static void weigh(RfCommonMean *mean, const gsl_matrix *precision, const double *values)
{
    double information = 0.0;
    for (size_t i = 0; i < mean->n; i++) {
        mean->parts[i].weight = row_sum(precision, i);
        information += mean->parts[i].weight;
    }
    mean->mean.sigma = 1.0 / sqrt(information);
    for (size_t i = 0; i < mean->n; i++) {
        mean->parts[i].weight /= information;
        mean->mean.value += mean->parts[i].weight * values[i];
    }
}

static void split_sigma(RfCommonMean *mean, const double *own_sigma, const double *common)
{
    double own = 0.0, shared = 0.0;
    for (size_t i = 0; i < mean->n; i++) {
        const double weight = mean->parts[i].weight;
        own += weight * weight * own_sigma[i] * own_sigma[i];
        for (size_t j = 0; j < mean->n; j++)
            shared += weight * mean->parts[j].weight * common[i * mean->n + j];
    }
    mean->sigma_own = sqrt(own);
    mean->sigma_common = sqrt(fmax(shared, 0.0));
}

/* One value against the others. Taking it out of V^-1 is a correction of rank one, so that no further inverse is
 * needed: with P = V^-1, r = P 1 and S = 1' P 1, the others' information is S - r_i^2/P_ii, and that on the offset
 * Q_ii = P_ii - r_i^2/S. */
static void compare(RfCommonMean *mean, const gsl_matrix *precision, const double *values, size_t i)
{
    RfCommonMeanPart *part = &mean->parts[i];
    const double information = 1.0 / (mean->mean.sigma * mean->mean.sigma);
    const double diagonal = gsl_matrix_get(precision, i, i), row = part->weight * information;
    const double pull = pull_of(precision, i, values, mean->mean.value);
    const double on_offset = diagonal - row * row / information;
    part->offset = (RfValue){pull / on_offset, 1.0 / sqrt(on_offset)};
    part->deviate = pull / sqrt(on_offset);
    part->p = 2.0 * gsl_cdf_ugaussian_Q(fabs(part->deviate));
    const double left = information - row * row / diagonal;
    part->without = (RfValue){mean->mean.value - row * pull / diagonal / left, 1.0 / sqrt(left)};
    mean->chi_squared += (values[i] - mean->mean.value) * pull;
}

RfCommonMean *rf_common_mean_new(const double *values, const double *own_sigma, const double *common,
                                 size_t n, GError **error)
{
    g_assert(n >= 1);
    gsl_matrix *precision = precision_of(own_sigma, common, n, error);
    if (precision == NULL) return NULL;
    RfCommonMean *mean = g_new0(RfCommonMean, 1);
    *mean = (RfCommonMean){.p = 1.0, .most_off_p = 1.0, .n = n, .parts = g_new0(RfCommonMeanPart, n)};
    weigh(mean, precision, values);
    split_sigma(mean, own_sigma, common);
    for (size_t i = 0; i < n; i++) mean->parts[i].p = 1.0;
    for (size_t i = 0; i < n && n > 1; i++) {
        compare(mean, precision, values, i);
        if (fabs(mean->parts[i].deviate) > fabs(mean->parts[mean->most_off].deviate)) mean->most_off = i;
    }
    if (n > 1) {
        mean->p = gsl_cdf_chisq_Q(fmax(mean->chi_squared, 0.0), (double)(n - 1));
        /* 1 - (1 - p)^n, without losing a small p */
        mean->most_off_p = -expm1((double)n * log1p(-fmin(mean->parts[mean->most_off].p, 1.0 - 1e-16)));
    }
    gsl_matrix_free(precision);
    return mean;
}

void rf_common_mean_free(RfCommonMean *mean)
{
    if (mean == NULL) return;
    g_free(mean->parts);
    g_free(mean);
}
