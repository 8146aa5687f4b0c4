#include "tracker/path_noise.h"

#include <math.h>
#include <string.h>

enum { run_most = 64, run_least = 16, lags = 4, unknowns = 3 };

/* Increments of one axis without interruption, under one field state. */
typedef struct {
    double increment_px[run_most], variance_px2[run_most];
    unsigned n;
} Run;

/* Sums over one chain and axis. */
typedef struct {
    double lag_px2[lags], variance_px2, n;
} Covariances;

/* A reversal inside a run would pass for correlation: the two halves must move alike. */
static bool is_steady(const Run *run, double variance_px2)
{
    double half[2] = {0, 0};
    unsigned h = run->n / 2;
    for (unsigned i = 0; i < 2 * h; i++) half[i / h] += run->increment_px[i] / h;
    return fabs(half[1] - half[0]) < 3.5 * sqrt(2 * variance_px2 / h);
}

static void add_run(Covariances *sums, const Run *run)
{
    if (run->n < run_least) return;
    double mean_px = 0, lag_px2[lags] = {0}, variance_px2 = 0;
    for (unsigned i = 0; i < run->n; i++) mean_px += run->increment_px[i] / run->n;
    for (unsigned l = 0; l < lags; l++)
        for (unsigned i = l; i < run->n; i++)
            lag_px2[l] +=
                (run->increment_px[i] - mean_px) * (run->increment_px[i - l] - mean_px) / (run->n - l);
    if (!is_steady(run, lag_px2[0])) return;
    /* taking the mean off lowers every lag by the variance of the mean */
    double lost_px2 = fmax(0, lag_px2[0] + 2 * lag_px2[1]) / run->n;
    for (unsigned i = 0; i < run->n; i++) variance_px2 += run->variance_px2[i] / run->n;
    for (unsigned l = 0; l < lags; l++) sums->lag_px2[l] += (lag_px2[l] + lost_px2) * run->n;
    sums->variance_px2 += variance_px2 * run->n;
    sums->n += run->n;
}

static bool is_next(const RfLinkScene *scene, const RfHit *a, const RfHit *b)
{
    double a_s = rf_link_scene_exposure(scene, a->exposure)->time_s;
    double b_s = rf_link_scene_exposure(scene, b->exposure)->time_s;
    if (fabs(b_s - a_s - scene->exposure_s) > 0.1 * scene->exposure_s) return false;
    double field_s = rf_field_course_integral_s(scene->field, a_s, b_s);
    return fabs(field_s - rf_field_course_state(scene->field, b_s) * (b_s - a_s)) < 1e-9;
}

static Covariances measure_chain(const RfLinkScene *scene, const RfChain *chain, int axis)
{
    Covariances sums = {0};
    Run run = {.n = 0};
    int state = 0;
    for (unsigned i = 1; i < chain->hits->len; i++) {
        const RfHit *a = &g_array_index(chain->hits, RfHit, i - 1),
                    *b = &g_array_index(chain->hits, RfHit, i);
        int now = rf_field_course_state(scene->field, rf_link_scene_exposure(scene, b->exposure)->time_s);
        bool is_part = is_next(scene, a, b);
        if (!is_part || now != state || run.n == run_most) {
            add_run(&sums, &run);
            run.n = 0;
        }
        state = now;
        if (!is_part) continue;
        const RfSight *p = &scene->sights[a->spot], *q = &scene->sights[b->spot];
        run.increment_px[run.n] = q->at_px[axis] - p->at_px[axis];
        run.variance_px2[run.n++] = (p->variance_px2[axis] + q->variance_px2[axis]) / 2;
    }
    add_run(&sums, &run);
    for (unsigned l = 0; l < lags; l++) sums.lag_px2[l] /= fmax(1, sums.n);
    sums.variance_px2 /= fmax(1, sums.n);
    return sums;
}

/* With c0 and c1 the lag-0 and lag-1 covariances, 2 D dt = c0 + 2 c1 and so c1 (1 - 2 R) = R c0 - f^2 u^2: regressing c1 on
 * c0, whose errors are nearly independent of c1's (on 2 D dt itself they would not be). Weighted least squares over
 * droplets; unknowns a = R / (1 - 2 R), and f^2 / (1 - 2 R) per axis. */
typedef struct {
    double a[unknowns][unknowns], b[unknowns];
} Normal;

static void add_equation(Normal *normal, const Covariances *c, int axis)
{
    double weight = c->n / fmax(1e-12, c->lag_px2[0] * c->lag_px2[0]);
    double row[unknowns] = {c->lag_px2[0], axis == 0 ? -c->variance_px2 : 0,
                            axis == 1 ? -c->variance_px2 : 0};
    for (int i = 0; i < unknowns; i++) {
        normal->b[i] += weight * row[i] * c->lag_px2[1];
        for (int j = 0; j < unknowns; j++) normal->a[i][j] += weight * row[i] * row[j];
    }
}

/* Inverse of the 2 x 2 or 3 x 3 system from unknown `from` on, by Gauss-Jordan; false if singular. */
static bool invert(const Normal *normal, int from, double inverse[unknowns][unknowns])
{
    double a[unknowns][unknowns];
    memcpy(a, normal->a, sizeof a);
    memset(inverse, 0, sizeof a);
    for (int i = from; i < unknowns; i++) inverse[i][i] = 1;
    for (int i = from; i < unknowns; i++) {
        if (a[i][i] < 1e-9 * fmax(normal->a[i][i], 1e-300)) return false;
        double pivot = 1 / a[i][i];
        for (int j = from; j < unknowns; j++) {
            a[i][j] *= pivot;
            inverse[i][j] *= pivot;
        }
        for (int k = from; k < unknowns; k++) {
            double factor = k == i ? 0 : a[k][i];
            for (int j = from; j < unknowns; j++) {
                a[k][j] -= factor * a[i][j];
                inverse[k][j] -= factor * inverse[i][j];
            }
        }
    }
    return true;
}

/* Fills scale and blur with a = R / (1 - 2 R) free, or fixed to `ratio` if that is >= 0. Returns a. */
static double solve(const Normal *normal, double ratio, RfPathErrors *noise)
{
    int from = ratio >= 0 ? 1 : 0;
    double inverse[unknowns][unknowns], found[unknowns] = {ratio, 1, 1};
    if (!invert(normal, from, inverse)) return fmax(0, ratio);
    for (int i = from; i < unknowns; i++) {
        found[i] = 0;
        for (int j = from; j < unknowns; j++)
            found[i] += inverse[i][j] * (normal->b[j] - (from ? normal->a[j][0] * ratio : 0));
    }
    noise->blur = found[0] / (1 + 2 * found[0]);
    double *scale[2] = {&noise->scale_x, &noise->scale_y},
           *u_scale[2] = {&noise->u_scale_x, &noise->u_scale_y};
    for (int k = 0; k < 2; k++) {
        double square = found[k + 1] * (1 - 2 * noise->blur);
        double sigma = sqrt(inverse[k + 1][k + 1]) * (1 - 2 * noise->blur);
        bool is_told = square > 2 * sigma;
        *scale[k] = is_told ? sqrt(square) : 1;
        *u_scale[k] = is_told ? sigma / (2 * *scale[k]) : 0;
    }
    return found[0];
}

RfPathErrors rf_path_noise_measure(const RfLinkScene *scene, const GPtrArray *chains)
{
    RfPathErrors noise = {.scale_x = 1, .scale_y = 1};
    Normal normal = {0};
    double total[2] = {0, 0};
    for (unsigned i = 0; i < chains->len; i++)
        for (int axis = 0; axis < 2; axis++) {
            Covariances c = measure_chain(scene, g_ptr_array_index(chains, i), axis);
            if (c.n < run_least) continue;
            add_equation(&normal, &c, axis);
            for (int l = 0; l < lags; l++) noise.lag_px2[axis][l] += c.lag_px2[l] * c.n;
            total[axis] += c.n;
        }
    for (int axis = 0; axis < 2; axis++)
        for (int l = 0; l < lags; l++) noise.lag_px2[axis][l] /= fmax(1, total[axis]);
    noise.increments = (unsigned)total[0];
    noise.blur = solve(&normal, -1, &noise);
    if (noise.blur < 0 || noise.blur > 0.25) noise.blur = solve(&normal, noise.blur < 0 ? 0 : 0.25, &noise);
    return noise;
}

static bool is_beyond_doubt(double scale, double u_scale)
{
    return u_scale > 0 && scale * scale - 3 * 2 * scale * u_scale > 1;
}

double rf_path_noise_widening(const RfPathErrors *noise, int axis)
{
    bool is_told = is_beyond_doubt(noise->scale_x, noise->u_scale_x) &&
                   is_beyond_doubt(noise->scale_y, noise->u_scale_y);
    return !is_told ? 1 : axis == 0 ? noise->scale_x : noise->scale_y;
}
