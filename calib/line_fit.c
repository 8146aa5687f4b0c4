#include "calib/line_fit.h"

#include <gsl/gsl_errno.h>
#include <gsl/gsl_linalg.h>
#include <math.h>
#include <stdlib.h>

enum { ROTATION, K1, FIRST_X, PERIOD_X, FIRST_Y, PERIOD_Y, PARAMETERS };

static const double tukey_cut = 4.685; /* 95 % efficient for normal errors (Beaton and Tukey 1974) */

typedef struct {
    GArray *pieces;
    double per_h2; /* 1/h^2 */
    double p[PARAMETERS];
    bool is_free[PARAMETERS];
    double covariance[PARAMETERS][PARAMETERS];
} Fit;

/* Distance from the model's line, and its derivatives. */
static double residual(const Fit *fit, const RfFitPiece *piece, double d[PARAMETERS])
{
    double rho2 = (piece->x_px * piece->x_px + piece->y_px * piece->y_px) * fit->per_h2;
    double stretch = 1.0 + fit->p[K1] * rho2, x = piece->x_px * stretch, y = piece->y_px * stretch;
    double c = cos(fit->p[ROTATION]), s = sin(fit->p[ROTATION]);
    for (int i = 0; i < PARAMETERS; i++) d[i] = 0.0;
    if (piece->is_horizontal) {
        d[ROTATION] = -c * x - s * y;
        d[K1] = (-s * piece->x_px + c * piece->y_px) * rho2;
        d[FIRST_Y] = -1.0;
        d[PERIOD_Y] = -piece->index;
        return -s * x + c * y - fit->p[FIRST_Y] - piece->index * fit->p[PERIOD_Y];
    }
    d[ROTATION] = -s * x + c * y;
    d[K1] = (c * piece->x_px + s * piece->y_px) * rho2;
    d[FIRST_X] = -1.0;
    d[PERIOD_X] = -piece->index;
    return c * x + s * y - fit->p[FIRST_X] - piece->index * fit->p[PERIOD_X];
}

static int by_value(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

/* 1.4826 times the median of |residual/sigma|: the standard deviation if they are normal. */
static double robust_scale(const GArray *pieces)
{
    g_autofree double *sizes = g_new(double, pieces->len + 1);
    for (unsigned i = 0; i < pieces->len; i++) {
        const RfFitPiece *piece = &g_array_index(pieces, RfFitPiece, i);
        sizes[i] = fabs(piece->residual_px) / piece->sigma_px;
    }
    qsort(sizes, pieces->len, sizeof *sizes, by_value);
    return pieces->len ? 1.4826 * sizes[pieces->len / 2] : 0.0;
}

static void reweight(const Fit *fit)
{
    double d[PARAMETERS];
    for (unsigned i = 0; i < fit->pieces->len; i++) {
        RfFitPiece *piece = &g_array_index(fit->pieces, RfFitPiece, i);
        piece->residual_px = residual(fit, piece, d);
    }
    double cut = tukey_cut * MAX(robust_scale(fit->pieces), 1e-9);
    for (unsigned i = 0; i < fit->pieces->len; i++) {
        RfFitPiece *piece = &g_array_index(fit->pieces, RfFitPiece, i);
        double z = piece->residual_px / piece->sigma_px / cut;
        piece->weight = fabs(z) < 1.0 ? (1.0 - z * z) * (1.0 - z * z) : 0.0;
    }
}

static int list_free(const Fit *fit, int list[PARAMETERS])
{
    int n = 0;
    for (int i = 0; i < PARAMETERS; i++)
        if (fit->is_free[i]) list[n++] = i;
    return n;
}

/* Sums over the pieces kept; `hard` counts each that is kept in full, for the covariance. */
static void add_up(const Fit *fit, bool hard, double m[PARAMETERS][PARAMETERS], double r[PARAMETERS])
{
    double d[PARAMETERS];
    for (unsigned i = 0; i < fit->pieces->len; i++) {
        const RfFitPiece *piece = &g_array_index(fit->pieces, RfFitPiece, i);
        double found = residual(fit, piece, d);
        double weight = (hard ? piece->weight > 0.0 : piece->weight) / (piece->sigma_px * piece->sigma_px);
        for (int a = 0; a < PARAMETERS; a++) {
            r[a] -= weight * d[a] * found;
            for (int b = 0; b < PARAMETERS; b++) m[a][b] += weight * d[a] * d[b];
        }
    }
}

/* Columns are brought to the same size first: radians and pixels differ by 1e3. Leaves the inverse in m. */
static bool invert(double m[PARAMETERS][PARAMETERS], const int *list, int n)
{
    double scale[PARAMETERS], data[PARAMETERS * PARAMETERS];
    for (int a = 0; a < n; a++) {
        if (!(m[list[a]][list[a]] > 0.0)) return false;
        scale[a] = 1.0 / sqrt(m[list[a]][list[a]]);
    }
    gsl_matrix_view view = gsl_matrix_view_array(data, (size_t)n, (size_t)n);
    for (int a = 0; a < n; a++)
        for (int b = 0; b < n; b++) data[a * n + b] = m[list[a]][list[b]] * scale[a] * scale[b];
    if (gsl_linalg_cholesky_decomp1(&view.matrix) != GSL_SUCCESS) return false;
    for (int a = 0; a < n; a++)
        if (!(data[a * n + a] > 1e-6)) return false;
    if (gsl_linalg_cholesky_invert(&view.matrix) != GSL_SUCCESS) return false;
    for (int a = 0; a < n; a++)
        for (int b = 0; b < n; b++) m[list[a]][list[b]] = data[a * n + b] * scale[a] * scale[b];
    return true;
}

static bool improve(Fit *fit, double *change)
{
    double m[PARAMETERS][PARAMETERS] = {{0}}, r[PARAMETERS] = {0};
    int list[PARAMETERS], n = list_free(fit, list);
    reweight(fit);
    add_up(fit, false, m, r);
    if (!invert(m, list, n)) return false;
    *change = 0.0;
    for (int a = 0; a < n; a++) {
        double step = 0.0;
        for (int b = 0; b < n; b++) step += m[list[a]][list[b]] * r[list[b]];
        fit->p[list[a]] += step;
        *change = MAX(*change, fabs(step) / sqrt(m[list[a]][list[a]]));
    }
    return isfinite(*change);
}

/* Ruling errors, and whatever else moves a line as a whole, show as line means that scatter more than their pieces allow. Returns the
 * factor (>= 1) on variances, from chi-square over its degrees of freedom. Pieces come line by line. */
static double line_scatter(const Fit *fit, double piece_variance)
{
    if (!(piece_variance > 0.0)) return 1.0; /* a drawn picture without any noise: every piece fits exactly */
    double chi2 = 0.0, sum = 0.0, weights = 0.0;
    int lines = 0, list[PARAMETERS],
        fitted = list_free(fit, list) - 1; /* the angle isn't of the line means */
    for (unsigned i = 0; i < fit->pieces->len; i++) {
        const RfFitPiece *piece = &g_array_index(fit->pieces, RfFitPiece, i);
        double weight = (piece->weight > 0.0) / (piece->sigma_px * piece->sigma_px * piece_variance);
        sum += weight * piece->residual_px;
        weights += weight;
        const RfFitPiece *next = i + 1 < fit->pieces->len ? piece + 1 : NULL;
        if (next && next->index == piece->index && next->is_horizontal == piece->is_horizontal) continue;
        if (weights > 0.0) {
            chi2 += sum * sum / weights;
            lines++;
        }
        sum = weights = 0.0;
    }
    return lines > fitted ? MAX(1.0, chi2 / (lines - fitted)) : 1.0;
}

static bool find_covariance(Fit *fit, double *residual_px)
{
    double r[PARAMETERS] = {0}, squares = 0.0, chi2 = 0.0;
    int list[PARAMETERS], n = list_free(fit, list), kept = 0;
    reweight(fit);
    for (unsigned i = 0; i < fit->pieces->len; i++) {
        const RfFitPiece *piece = &g_array_index(fit->pieces, RfFitPiece, i);
        if (!(piece->weight > 0.0)) continue;
        kept++;
        squares += piece->residual_px * piece->residual_px;
        chi2 += pow(piece->residual_px / piece->sigma_px, 2.0);
    }
    if (kept <= n) return false;
    double variance = chi2 / (kept - n);
    for (int a = 0; a < PARAMETERS; a++)
        for (int b = 0; b < PARAMETERS; b++) fit->covariance[a][b] = 0.0;
    add_up(fit, true, fit->covariance, r);
    if (!invert(fit->covariance, list, n)) return false;
    variance *= line_scatter(fit, variance) / 0.95; /* the biweight's efficiency */
    for (int a = 0; a < PARAMETERS; a++)
        for (int b = 0; b < PARAMETERS; b++)
            fit->covariance[a][b] *= fit->is_free[a] && fit->is_free[b] ? variance : 0.0;
    *residual_px = sqrt(squares / kept);
    return true;
}

static RfValue value_of(const Fit *fit, int parameter)
{
    return (RfValue){fit->p[parameter], sqrt(fit->covariance[parameter][parameter])};
}

static double squareness_sigma(const Fit *fit)
{
    if (!fit->is_free[PERIOD_X] || !fit->is_free[PERIOD_Y]) return 0.0;
    double x = fit->p[PERIOD_X], y = fit->p[PERIOD_Y];
    double relative = fit->covariance[PERIOD_X][PERIOD_X] / (x * x) +
                      fit->covariance[PERIOD_Y][PERIOD_Y] / (y * y) -
                      2.0 * fit->covariance[PERIOD_X][PERIOD_Y] / (x * y);
    return y / x * sqrt(MAX(relative, 0.0));
}

bool rf_line_fit(GArray *pieces, double half_diagonal_px, bool with_k1, RfLineFit *out)
{
    Fit fit = {.pieces = pieces, .per_h2 = 1.0 / (half_diagonal_px * half_diagonal_px)};
    double start[PARAMETERS] = {out->rotation_rad.value, 0.0,
                                out->first_x_px,         out->period_x_px.value,
                                out->first_y_px,         out->period_y_px.value};
    double change = HUGE_VAL;
    for (int i = 0; i < PARAMETERS; i++) fit.p[i] = start[i];
    fit.is_free[ROTATION] = true;
    fit.is_free[K1] = with_k1;
    fit.is_free[FIRST_X] = fit.is_free[PERIOD_X] = out->period_x_px.value > 0.0;
    fit.is_free[FIRST_Y] = fit.is_free[PERIOD_Y] = out->period_y_px.value > 0.0;
    for (int i = 0; i < 60 && change > 1e-6; i++)
        if (!improve(&fit, &change)) return false;
    if (!find_covariance(&fit, &out->residual_px)) return false;
    out->rotation_rad = value_of(&fit, ROTATION);
    out->k1 = value_of(&fit, K1);
    out->period_x_px = value_of(&fit, PERIOD_X);
    out->period_y_px = value_of(&fit, PERIOD_Y);
    out->first_x_px = fit.p[FIRST_X];
    out->first_y_px = fit.p[FIRST_Y];
    out->squareness_sigma = squareness_sigma(&fit);
    return true;
}
