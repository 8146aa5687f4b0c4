#include "calib/gravity_axis.h"

#include <glib.h>

#include <math.h>
#include <stdlib.h>
#include <string.h>

static const double most_turn_rad =
    0.5236; /* 30 degrees: beyond that the sheet's word for the direction would be wrong */

enum { MOST_PARAMETERS = 3 };

/* A leg turned into the axes of a trial direction. */
typedef struct {
    unsigned interval;
    double along, across, var_across;
    double fall, field; /* parts of `along`: without field, and what the field adds (0 where off) */
} Turned;

static int by_interval(const void *a, const void *b, void *unused)
{
    (void)unused;
    unsigned x = ((const RfMotionLeg *)a)->interval, y = ((const RfMotionLeg *)b)->interval;
    return (x > y) - (x < y);
}

static void turn_legs(const RfMotionLeg *legs, size_t n, double angle_rad, Turned *turned)
{
    double c = cos(angle_rad), s = sin(angle_rad);
    for (size_t i = 0; i < n; i++) {
        const RfMotionLeg *leg = &legs[i];
        turned[i] =
            (Turned){.interval = leg->interval,
                     .along = -s * leg->vx + c * leg->vy,
                     .across = c * leg->vx + s * leg->vy,
                     .var_across = c * c * leg->var_x + 2.0 * c * s * leg->cov_xy + s * s * leg->var_y};
    }
}

/* Weighted mean of a droplet's motion along, without field; false if it was never off. */
static bool mean_fall(const RfMotionLeg *legs, const Turned *turned, size_t n, unsigned droplet, double *fall)
{
    double sum = 0.0, weights = 0.0;
    for (size_t i = 0; i < n; i++) {
        if (legs[i].droplet != droplet || !legs[i].is_off) continue;
        sum += turned[i].along / turned[i].var_across;
        weights += 1.0 / turned[i].var_across;
    }
    if (weights > 0.0) *fall = sum / weights;
    return weights > 0.0;
}

/* Generalised least squares of `across` on the regressors, intervals sharing an error of variance tau2. Normal equations by
 * the Sherman-Morrison inverse of each interval's covariance. */
typedef struct {
    int parameters;
    double value[MOST_PARAMETERS];
    double covariance[MOST_PARAMETERS][MOST_PARAMETERS];
    double chi2,
        log_determinant; /* of the data's covariance and of the normal matrix: for the restricted likelihood */
    int intervals;
} Regression;

/* Regressors: the interval-independent air motion, then motion along, or its two parts. */
static void regressors(const Turned *t, int parameters, double x[MOST_PARAMETERS])
{
    x[0] = 1.0;
    x[1] = parameters == 2 ? t->along : t->fall;
    x[2] = parameters == 3 ? t->field : 0.0;
}

typedef struct {
    double m[MOST_PARAMETERS][MOST_PARAMETERS], r[MOST_PARAMETERS], yy;
} Normal;

static void add_interval(const Turned *turned, size_t from, size_t to, double tau2, int p, Normal *normal,
                         Regression *g)
{
    double sum_w = 0.0, sum_wx[MOST_PARAMETERS] = {0}, sum_wy = 0.0;
    for (size_t i = from; i < to; i++) {
        double w = 1.0 / turned[i].var_across, x[MOST_PARAMETERS];
        regressors(&turned[i], p, x);
        sum_w += w;
        sum_wy += w * turned[i].across;
        normal->yy += w * turned[i].across * turned[i].across;
        g->log_determinant += log(turned[i].var_across);
        for (int a = 0; a < p; a++) {
            sum_wx[a] += w * x[a];
            normal->r[a] += w * x[a] * turned[i].across;
            for (int b = 0; b < p; b++) normal->m[a][b] += w * x[a] * x[b];
        }
    }
    double shared = tau2 / (1.0 + tau2 * sum_w);
    normal->yy -= shared * sum_wy * sum_wy;
    g->log_determinant += log(1.0 + tau2 * sum_w);
    g->intervals++;
    for (int a = 0; a < p; a++) {
        normal->r[a] -= shared * sum_wx[a] * sum_wy;
        for (int b = 0; b < p; b++) normal->m[a][b] -= shared * sum_wx[a] * sum_wx[b];
    }
}

/* In place; columns scaled to unit diagonal first. False if the legs don't tell the parameters apart. */
static bool invert(double m[MOST_PARAMETERS][MOST_PARAMETERS], int n, double *log_determinant)
{
    double scale[MOST_PARAMETERS];
    for (int i = 0; i < n; i++) {
        if (!(m[i][i] > 0.0)) return false;
        scale[i] = 1.0 / sqrt(m[i][i]);
    }
    for (int i = 0; i < n; i++)
        for (int k = 0; k < n; k++) m[i][k] *= scale[i] * scale[k];
    for (int i = 0; i < n; i++) {
        double pivot = m[i][i];
        if (!(pivot > 1e-9)) return false;
        *log_determinant += log(pivot) - 2.0 * log(scale[i]);
        m[i][i] = 1.0;
        for (int k = 0; k < n; k++) m[i][k] /= pivot;
        for (int row = 0; row < n; row++) {
            if (row == i) continue;
            double factor = m[row][i];
            m[row][i] = 0.0;
            for (int k = 0; k < n; k++) m[row][k] -= factor * m[i][k];
        }
    }
    for (int i = 0; i < n; i++)
        for (int k = 0; k < n; k++) m[i][k] *= scale[i] * scale[k];
    return true;
}

static bool regress(const Turned *turned, size_t n, double tau2, int parameters, Regression *g)
{
    Normal normal = {0};
    *g = (Regression){.parameters = parameters};
    for (size_t from = 0, to; from < n; from = to) {
        for (to = from + 1; to < n && turned[to].interval == turned[from].interval;) to++;
        add_interval(turned, from, to, tau2, parameters, &normal, g);
    }
    if (!invert(normal.m, parameters, &g->log_determinant)) return false;
    g->chi2 = normal.yy;
    memcpy(g->covariance, normal.m, sizeof normal.m);
    for (int a = 0; a < parameters; a++) {
        for (int b = 0; b < parameters; b++) g->value[a] += normal.m[a][b] * normal.r[b];
        g->chi2 -= g->value[a] * normal.r[a];
    }
    g->chi2 = fmax(g->chi2, 0.0);
    return true;
}

/* Restricted maximum likelihood (Patterson and Thompson 1971) on a fixed ladder of values, then between its rungs. */
static double best_tau2(const Turned *turned, size_t n, int parameters, double most)
{
    double best = 0.0, least = HUGE_VAL;
    for (int rung = -1; rung <= 80; rung++) {
        Regression g;
        double tau2 = rung < 0 ? 0.0 : most * pow(10.0, -0.1 * rung);
        if (!regress(turned, n, tau2, parameters, &g)) return 0.0;
        double found = g.chi2 + g.log_determinant;
        if (found < least) {
            least = found;
            best = tau2;
        }
    }
    return best;
}

/* No interval's motion can vary by more than all that is seen across. */
static double largest_square(const Turned *turned, size_t n)
{
    double mean = 0.0, most = 0.0;
    for (size_t i = 0; i < n; i++) mean += turned[i].across / (double)n;
    for (size_t i = 0; i < n; i++) most = fmax(most, pow(turned[i].across - mean, 2.0));
    return 4.0 * most;
}

/* What the intervals' common motion doesn't explain: drift that differs from droplet to droplet widens the sigma. */
static double excess(const Regression *g, size_t n)
{
    return n > (size_t)g->parameters ? g->chi2 / (double)(n - (size_t)g->parameters) : 1.0;
}

/* The angle by turning until nothing is left to turn: at that point errors in `along` no longer pull it towards zero. */
static bool turn_until_straight(const RfMotionLeg *legs, size_t n, double nominal_rad, Turned *turned,
                                double *angle_rad, double *tau2, Regression *g)
{
    *angle_rad = nominal_rad;
    for (int i = 0; i < 50; i++) {
        turn_legs(legs, n, *angle_rad, turned);
        *tau2 = best_tau2(turned, n, 2, largest_square(turned, n));
        if (!regress(turned, n, *tau2, 2, g)) return false;
        double step_rad = atan(g->value[1]);
        *angle_rad -= step_rad;
        if (fabs(*angle_rad - nominal_rad) > most_turn_rad) return false;
        if (fabs(step_rad) < 1e-7) return true;
    }
    return false;
}

/* Field and gravity each with an angle of their own: across = c - (turn of gravity) fall - (turn of field) field. */
static void test_tilt(const RfMotionLeg *legs, Turned *turned, size_t n, RfGravityAxis *axis)
{
    size_t kept = 0;
    g_autofree Turned *parts = g_new(Turned, n);
    for (size_t i = 0; i < n; i++) {
        double fall = 0;
        if (!mean_fall(legs, turned, n, legs[i].droplet, &fall)) continue;
        parts[kept] = turned[i];
        parts[kept].fall = legs[i].is_off ? turned[i].along : fall;
        parts[kept].field = legs[i].is_off ? 0.0 : turned[i].along - fall;
        kept++;
    }
    Regression g;
    double tau2 = best_tau2(parts, kept, 3, largest_square(parts, kept));
    if (kept < 5 || !regress(parts, kept, tau2, 3, &g)) return;
    double variance = g.covariance[1][1] + g.covariance[2][2] - 2.0 * g.covariance[1][2];
    double sigma_rad = sqrt(fmax(variance, 0.0) * fmax(1.0, excess(&g, kept)));
    axis->tilt_rad = (RfValue){g.value[1] - g.value[2], sigma_rad};
    if (sigma_rad > 0.0) axis->tilt_p = erfc(fabs(axis->tilt_rad.value) / sigma_rad / sqrt(2.0));
}

static bool is_usable(const RfMotionLeg *leg)
{
    double determinant = leg->var_x * leg->var_y - leg->cov_xy * leg->cov_xy;
    return isfinite(leg->vx) && isfinite(leg->vy) && isfinite(leg->var_x) && isfinite(leg->var_y) &&
           leg->var_x > 0.0 && leg->var_y > 0.0 && determinant > 0.0;
}

/* Sorted by interval; order within one is kept, so that the same legs give the same bits. */
static size_t take_usable(const RfMotionLeg *legs, size_t n, RfMotionLeg *into)
{
    size_t kept = 0;
    for (size_t i = 0; i < n; i++)
        if (is_usable(&legs[i])) into[kept++] = legs[i];
    g_qsort_with_data(into, (int)kept, sizeof *into, by_interval, NULL);
    return kept;
}

RfGravityAxis rf_gravity_axis_refine(const RfMotionLeg *legs, size_t n, double nominal_rad)
{
    RfGravityAxis axis = {.gravity_rad = {nominal_rad, 0.0}, .tilt_p = 1.0, .chi2_per_dof = 1.0};
    g_autofree RfMotionLeg *usable = g_new(RfMotionLeg, n + 1);
    g_autofree Turned *turned = g_new(Turned, n + 1);
    Regression g;
    double angle_rad, tau2;
    axis.legs = take_usable(legs, n, usable);
    if (axis.legs < 3 || !turn_until_straight(usable, axis.legs, nominal_rad, turned, &angle_rad, &tau2, &g))
        return axis;
    axis.chi2_per_dof = excess(&g, axis.legs);
    axis.gravity_rad = (RfValue){angle_rad, sqrt(g.covariance[1][1] * fmax(1.0, axis.chi2_per_dof))};
    axis.air_sigma = sqrt(tau2);
    axis.is_found = axis.gravity_rad.sigma < most_turn_rad;
    if (!axis.is_found) axis.gravity_rad = (RfValue){nominal_rad, 0.0};
    test_tilt(usable, turned, axis.legs, &axis);
    return axis;
}

RfGravityAxis rf_gravity_axis_find(const RfMotionLeg *legs, size_t n)
{
    double wx = 0.0, wy = 0.0, x = 0.0, y = 0.0;
    for (size_t i = 0; i < n; i++) {
        if (!legs[i].is_off || !is_usable(&legs[i])) continue;
        wx += 1.0 / legs[i].var_x;
        wy += 1.0 / legs[i].var_y;
        x += legs[i].vx / legs[i].var_x;
        y += legs[i].vy / legs[i].var_y;
    }
    if (!(wx > 0.0)) return rf_gravity_axis_refine(NULL, 0, 0.0);
    x /= wx;
    y /= wy;
    double significance2 =
        x * x * wx + y * y * wy; /* chi-square of two degrees of freedom; 11.83 is 3 sigma */
    if (significance2 < 11.83) return rf_gravity_axis_refine(NULL, 0, 0.0);
    return rf_gravity_axis_refine(legs, n, atan2(-x, y));
}
