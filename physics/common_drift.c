#include "physics/common_drift.h"

#include <gsl/gsl_cdf.h>
#include <gsl/gsl_linalg.h>
#include <math.h>

RfCommonDrift *rf_common_drift_new(void)
{
    RfCommonDrift *drift = g_new0(RfCommonDrift, 1);
    drift->fall_time_s = g_array_new(FALSE, TRUE, sizeof(double));
    drift->across_time_s = g_array_new(FALSE, TRUE, sizeof(double));
    drift->fall_m_s = g_array_new(FALSE, TRUE, sizeof(double));
    drift->across_m_s = g_array_new(FALSE, TRUE, sizeof(double));
    drift->fall_p = drift->across_p = 1;
    return drift;
}

void rf_common_drift_free(RfCommonDrift *drift)
{
    if (!drift) return;
    g_array_unref(drift->fall_time_s);
    g_array_unref(drift->across_time_s);
    g_array_unref(drift->fall_m_s);
    g_array_unref(drift->across_m_s);
    g_free(drift);
}

/* Integral of a piecewise linear velocity from the first knot; beyond the ends the velocity there goes on. */
static double displacement(const GArray *knots_s, const GArray *speeds_m_s, double time_s)
{
    const double *t = (const double *)(const void *)knots_s->data,
                 *v = (const double *)(const void *)speeds_m_s->data;
    unsigned n = knots_s->len;
    double sum = 0;
    if (n == 0) return 0;
    if (n == 1 || time_s <= t[0]) return v[0] * (time_s - t[0]);
    for (unsigned k = 0; k + 1 < n; k++) {
        double length = t[k + 1] - t[k], part = time_s < t[k + 1] ? time_s - t[k] : length;
        sum += part * (v[k] + 0.5 * (v[k + 1] - v[k]) * part / length);
        if (time_s < t[k + 1]) return sum;
    }
    return sum + v[n - 1] * (time_s - t[n - 1]);
}

double rf_common_drift_fall_m(const RfCommonDrift *drift, double time_s)
{
    return drift ? displacement(drift->fall_time_s, drift->fall_m_s, time_s) : 0;
}

double rf_common_drift_across_m(const RfCommonDrift *drift, double time_s)
{
    return drift ? displacement(drift->across_time_s, drift->across_m_s, time_s) : 0;
}

/* Knots this far apart follow convection, which turns over in tens of seconds, and leave diffusion alone. */
static const double KNOT_S = 4, BIN_S = 0.25;
/* Speeds beyond this aren't drift; keeps knots that nobody watched in bounds. */
static const double SPEED_PRIOR_M_S = 20e-6;
static const double SIGNIFICANT_P = 1e-3;

/* Normal equations of the knots, each path's own speed eliminated. */
typedef struct {
    size_t knots;
    double start_s, step_s;
    gsl_matrix *information;
    gsl_vector *sum;
} Normal;

/* Integral of the hat function about knot k from one time to another. */
static double hat_integral(const Normal *e, size_t k, double from_s, double to_s)
{
    enum { POINTS = 4 }; /* bins are much shorter than the distance of knots */
    double sum = 0;
    for (int i = 0; i < POINTS; i++) {
        double t = from_s + (to_s - from_s) * (i + 0.5) / POINTS;
        sum += fmax(0, 1 - fabs((t - e->start_s) / e->step_s - (double)k));
    }
    return sum * (to_s - from_s) / POINTS;
}

typedef struct {
    double ww, wy;  /* weighted squares of bin lengths, products with displacements */
    gsl_vector *wh; /* products of lengths with hats */
} OwnSpeed;

static void add_bin(Normal *e, OwnSpeed *own, double from_s, double to_s, double moved_m, double weight)
{
    double length = to_s - from_s;
    size_t first = (size_t)fmax(0, floor((from_s - e->start_s) / e->step_s));
    size_t last = MIN(e->knots - 1, (size_t)fmax(0, ceil((to_s - e->start_s) / e->step_s)));
    own->ww += weight * length * length;
    own->wy += weight * length * moved_m;
    for (size_t k = first; k <= last; k++) {
        double h = hat_integral(e, k, from_s, to_s);
        *gsl_vector_ptr(e->sum, k) += weight * h * moved_m;
        *gsl_vector_ptr(own->wh, k) += weight * h * length;
        for (size_t j = first; j <= last; j++)
            *gsl_matrix_ptr(e->information, k, j) += weight * h * hat_integral(e, j, from_s, to_s);
    }
}

static void add_path(Normal *e, const RfDriftPath *path)
{
    OwnSpeed own = {0, 0, gsl_vector_calloc(e->knots)};
    size_t from = 0;
    for (size_t i = 1; i < path->n; i++) {
        double length = path->time_s[i] - path->time_s[from];
        if (length < BIN_S) continue;
        double weight = 1 / (2 * path->diffusion_m2_s * length + path->noise_m2);
        add_bin(e, &own, path->time_s[from], path->time_s[i], path->place_m[i] - path->place_m[from], weight);
        from = i;
    }
    if (own.ww > 0) {
        for (size_t k = 0; k < e->knots; k++) {
            double part = gsl_vector_get(own.wh, k) / own.ww;
            *gsl_vector_ptr(e->sum, k) -= part * own.wy;
            for (size_t j = 0; j < e->knots; j++)
                *gsl_matrix_ptr(e->information, k, j) -= part * gsl_vector_get(own.wh, j);
        }
    }
    gsl_vector_free(own.wh);
}

/* Solves for the knots; twice the gain in log-likelihood, or a negative number on failure. */
static double solve(Normal *e, gsl_vector *speed)
{
    double twice_gain = 0, prior = 1 / (SPEED_PRIOR_M_S * SPEED_PRIOR_M_S);
    for (size_t k = 0; k < e->knots; k++) *gsl_matrix_ptr(e->information, k, k) += prior;
    if (gsl_linalg_cholesky_decomp1(e->information) != 0) return -1;
    gsl_linalg_cholesky_solve(e->information, e->sum, speed);
    for (size_t k = 0; k < e->knots; k++) twice_gain += gsl_vector_get(e->sum, k) * gsl_vector_get(speed, k);
    return twice_gain;
}

static double keep_knots(const Normal *e, const gsl_vector *speed, GArray *time_s, GArray *speed_m_s)
{
    double mean = 0, squares = 0;
    for (size_t k = 0; k < e->knots; k++) mean += gsl_vector_get(speed, k) / (double)e->knots;
    for (size_t k = 0; k < e->knots; k++) {
        double t = e->start_s + (double)k * e->step_s, v = gsl_vector_get(speed, k) - mean;
        g_array_append_val(time_s, t);
        g_array_append_val(speed_m_s, v);
        squares += v * v;
    }
    return sqrt(squares / (double)e->knots);
}

double rf_common_drift_fit(const RfDriftPath *paths, size_t n, GArray *time_s, GArray *speed_m_s, double *p)
{
    double start_s = HUGE_VAL, end_s = -HUGE_VAL, rms = 0;
    g_array_set_size(time_s, 0);
    g_array_set_size(speed_m_s, 0);
    *p = 1;
    for (size_t j = 0; j < n; j++) {
        if (paths[j].n == 0) continue;
        start_s = fmin(start_s, paths[j].time_s[0]);
        end_s = fmax(end_s, paths[j].time_s[paths[j].n - 1]);
    }
    if (!(end_s - start_s > 2 * KNOT_S)) return 0;
    size_t pieces = (size_t)ceil((end_s - start_s) / KNOT_S);
    Normal e = {.knots = pieces + 1, .start_s = start_s, .step_s = (end_s - start_s) / (double)pieces};
    e.information = gsl_matrix_calloc(e.knots, e.knots);
    e.sum = gsl_vector_calloc(e.knots);
    gsl_vector *speed = gsl_vector_calloc(e.knots);
    for (size_t j = 0; j < n; j++) add_path(&e, &paths[j]);
    double twice_gain = solve(&e, speed);
    if (twice_gain > 0) *p = gsl_cdf_chisq_Q(twice_gain, (double)(e.knots - 1));
    if (*p < SIGNIFICANT_P) rms = keep_knots(&e, speed, time_s, speed_m_s);
    gsl_vector_free(speed);
    gsl_vector_free(e.sum);
    gsl_matrix_free(e.information);
    return rms;
}
