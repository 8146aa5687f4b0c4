#include "physics/droplet_search.h"

#include <gsl/gsl_linalg.h>
#include <gsl/gsl_multimin.h>
#include <math.h>
#include <string.h>

#include "physics/drag.h"

static const double IMPOSSIBLE = -1e30;
static const double RADIUS_MIN_M = 20e-9, RADIUS_MAX_M = 20e-6;

void rf_search_init(RfSearch *search, const RfDropletPath *path, const RfDropletModel *model,
                    RfSearchPoint *start)
{
    double diffusion, noise;
    rf_droplet_path_scatter(path, &diffusion, &noise);
    /* Scatter of a short path may be anything: start between 0.2 and 2 um, where droplets are. */
    diffusion = fmin(diffusion, rf_drag_diffusion_m2_s(model->medium, 0.2e-6));
    diffusion = fmax(diffusion, rf_drag_diffusion_m2_s(model->medium, 2e-6));
    double radius = 0.2e-6;
    while (rf_drag_diffusion_m2_s(model->medium, radius) > diffusion && radius < 2e-6) radius *= 1.05;
    double spread = diffusion * path->typical_step_s;
    *search = (RfSearch){
        .path = path,
        .medium = model->medium,
        .fall_memory = model->fall_memory,
        .across_memory = model->across_memory,
        .noise_unit_m2 = spread + path->mean_u2_m2,
        .step = {0.004, 0.01, 0.01},
    };
    double extra = fmax(noise - path->mean_u2_m2, -0.25 * spread) / search->noise_unit_m2;
    *start = (RfSearchPoint){.at = {log(radius), extra, extra}};
}

static RfPathNoise noise_at(const RfSearch *search, double log_radius, double noise, RfNoiseMemory memory)
{
    return (RfPathNoise){rf_drag_diffusion_m2_s(search->medium, exp(log_radius)),
                         noise * search->noise_unit_m2, memory};
}

static bool is_radius_possible(double log_radius)
{
    return log_radius > log(RADIUS_MIN_M) && log_radius < log(RADIUS_MAX_M);
}

/* Whitens the scratch columns and solves; data in column 0. */
static double finish_axis(const RfPathNoise *noise, const RfDropletPath *path, const double *u_m, size_t m,
                          RfAxisFit *fit)
{
    double log_det, rest, log_det_information;
    fit->p = m - 1;
    if (!rf_path_likelihood_whiten(noise, path->n, path->times_s, u_m, m, path->scratch, &log_det) ||
        !rf_path_likelihood_solve(path->n, m, path->scratch, fit->coefficient, fit->covariance, &rest,
                                  &log_det_information))
        return IMPOSSIBLE;
    double free_samples = (double)(path->n - 1) - (double)fit->p;
    fit->log_likelihood = -0.5 * (log_det + rest + log_det_information + free_samples * log(2 * M_PI));
    return fit->log_likelihood;
}

/* Columns: fall less settling, impulses of the charged spells, and (loose) time. */
static double fall_axis(const RfSearch *search, double log_radius, double noise, bool has_free_speed,
                        RfAxisFit *fit)
{
    const RfDropletPath *path = search->path;
    size_t charged = path->charged, m = 1 + charged + (has_free_speed ? 1 : 0);
    double settling = search->is_loose ? 0 : rf_drag_settling_speed_m_s(search->medium, exp(log_radius));
    for (size_t i = 0; i < path->n; i++) {
        double *row = path->scratch + i * m, t = path->times_s[i] - path->times_s[0];
        row[0] = path->fall_m[i] - settling * t;
        for (size_t j = 0; j < charged; j++) row[1 + j] = path->impulse_v_s[i * charged + j];
        if (has_free_speed) row[1 + charged] = t;
    }
    RfPathNoise at = noise_at(search, log_radius, noise, search->fall_memory);
    return finish_axis(&at, path, path->u_fall_m, m, fit);
}

double rf_search_fall_axis(const RfSearch *search, double log_radius, double noise, RfAxisFit *fit)
{
    RfAxisFit own;
    RfAxisFit *into = fit ? fit : &own;
    into->log_likelihood = IMPOSSIBLE;
    if (!is_radius_possible(log_radius)) return IMPOSSIBLE;
    double found = fall_axis(search, log_radius, noise, search->is_loose, into);
    /* Watched with the field on only: a free speed can't be told from the field's. */
    if (search->is_loose && found == IMPOSSIBLE) found = fall_axis(search, log_radius, noise, false, into);
    return found;
}

double rf_search_across_axis(const RfSearch *search, double log_radius, double noise, RfAxisFit *fit)
{
    const RfDropletPath *path = search->path;
    RfAxisFit own;
    RfAxisFit *into = fit ? fit : &own;
    into->log_likelihood = IMPOSSIBLE;
    if (!is_radius_possible(log_radius)) return IMPOSSIBLE;
    for (size_t i = 0; i < path->n; i++) {
        path->scratch[2 * i] = path->across_m[i];
        path->scratch[2 * i + 1] = path->times_s[i] - path->times_s[0];
    }
    RfPathNoise at = noise_at(search, log_radius, noise, search->across_memory);
    return finish_axis(&at, path, path->u_across_m, 2, into);
}

typedef double (*AxisFunction)(const RfSearch *search, double log_radius, double noise, RfAxisFit *fit);

/* Value, gradient and second derivatives of one axis over (ln radius, its noise), from seven points. */
typedef struct {
    double value, slope[2], curve[3]; /* curve: rr, rn, nn */
} AxisSlopes;

static bool axis_slopes(const RfSearch *search, AxisFunction f, double r, double c, double h, double k,
                        AxisSlopes *s)
{
    double f0 = f(search, r, c, NULL), rp = f(search, r + h, c, NULL), rm = f(search, r - h, c, NULL);
    double cp = f(search, r, c + k, NULL), cm = f(search, r, c - k, NULL);
    double pp = f(search, r + h, c + k, NULL), mm = f(search, r - h, c - k, NULL);
    double lowest = fmin(fmin(fmin(f0, rp), fmin(rm, cp)), fmin(fmin(cm, pp), mm));
    s->value = f0;
    if (lowest <= IMPOSSIBLE) return false;
    s->slope[0] = (rp - rm) / (2 * h);
    s->slope[1] = (cp - cm) / (2 * k);
    s->curve[0] = (rp - 2 * f0 + rm) / (h * h);
    s->curve[1] = (pp - rp - cp + 2 * f0 - rm - cm + mm) / (2 * h * k);
    s->curve[2] = (cp - 2 * f0 + cm) / (k * k);
    return true;
}

/* Close to where noise and blur cancel, one of the seven points may be impossible: closer ones then. */
static bool careful_slopes(const RfSearch *search, AxisFunction f, double r, double c, double k,
                           AxisSlopes *s)
{
    double h = search->step[RF_LOG_RADIUS];
    for (int attempt = 0; attempt < 4; attempt++, h /= 3, k /= 3)
        if (axis_slopes(search, f, r, c, h, k, s)) return true;
    return false;
}

bool rf_search_slopes(const RfSearch *search, const double *at, double *log_likelihood, double *gradient,
                      double information[RF_SEARCH_PARAMETERS][RF_SEARCH_PARAMETERS])
{
    AxisSlopes fall = {0}, across = {0};
    if (!careful_slopes(search, rf_search_fall_axis, at[0], at[1], search->step[1], &fall) ||
        !careful_slopes(search, rf_search_across_axis, at[0], at[2], search->step[2], &across))
        return false;
    *log_likelihood = fall.value + across.value;
    gradient[0] = fall.slope[0] + across.slope[0];
    gradient[1] = fall.slope[1];
    gradient[2] = across.slope[1];
    double minus[3][3] = {{fall.curve[0] + across.curve[0], fall.curve[1], across.curve[1]},
                          {fall.curve[1], fall.curve[2], 0},
                          {across.curve[1], 0, across.curve[2]}};
    for (int i = 0; i < 3; i++)
        for (int j = 0; j < 3; j++) information[i][j] = -minus[i][j];
    return true;
}

/* covariance = information^-1; false unless positive definite, that is, curved like a summit. */
static bool invert(double information[3][3], double covariance[3][3])
{
    memcpy(covariance, information, sizeof(double[3][3]));
    gsl_matrix_view view = gsl_matrix_view_array(covariance[0], 3, 3);
    return gsl_linalg_cholesky_decomp1(&view.matrix) == 0 && gsl_linalg_cholesky_invert(&view.matrix) == 0;
}

static double value_at(const RfSearch *search, const double *at)
{
    double fall = rf_search_fall_axis(search, at[0], at[1], NULL);
    if (fall <= IMPOSSIBLE) return IMPOSSIBLE;
    double across = rf_search_across_axis(search, at[0], at[2], NULL);
    return across <= IMPOSSIBLE ? IMPOSSIBLE : fall + across;
}

/* A Newton step, shortened until it leads up. Returns the gain; 0: can't rise any further along it. */
static double newton_step(const RfSearch *search, double *at, double value, const double *gradient,
                          double covariance[3][3])
{
    static const double longest[3] = {0.4, 2, 2};
    double step[3], scale = 1;
    for (int i = 0; i < 3; i++) {
        step[i] = 0;
        for (int j = 0; j < 3; j++) step[i] += covariance[i][j] * gradient[j];
        scale = fmin(scale, longest[i] / fmax(fabs(step[i]), 1e-12));
    }
    for (int attempt = 0; attempt < 12; attempt++, scale /= 2) {
        double to[3] = {at[0] + scale * step[0], at[1] + scale * step[1], at[2] + scale * step[2]};
        double risen = value_at(search, to);
        if (risen < value) continue;
        memcpy(at, to, sizeof to);
        return risen - value;
    }
    return 0;
}

typedef enum { CLIMB_DONE, CLIMB_NOT_CURVED, CLIMB_LOST } Climb;

static Climb newton(const RfSearch *search, RfSearchPoint *point)
{
    double information[3][3];
    for (int iteration = 0; iteration < 25; iteration++) {
        if (!rf_search_slopes(search, point->at, &point->log_likelihood, point->gradient, information))
            return CLIMB_LOST;
        if (!invert(information, point->covariance)) return CLIMB_NOT_CURVED;
        double promise = 0;
        for (int i = 0; i < 3; i++)
            for (int j = 0; j < 3; j++)
                promise += point->gradient[i] * point->covariance[i][j] * point->gradient[j];
        /* Half a promise of 2e-5 is a step of 0.5 % of a sigma. */
        if (promise < 2e-5) return CLIMB_DONE;
        if (newton_step(search, point->at, point->log_likelihood, point->gradient, point->covariance) < 1e-9)
            return promise < 1e-2 ? CLIMB_DONE : CLIMB_NOT_CURVED;
    }
    return CLIMB_NOT_CURVED;
}

static double simplex_height(const gsl_vector *x, void *search)
{
    return -value_at(search, gsl_vector_const_ptr(x, 0));
}

static void simplex(const RfSearch *search, double *at)
{
    gsl_multimin_fminimizer *m = gsl_multimin_fminimizer_alloc(gsl_multimin_fminimizer_nmsimplex2, 3);
    double reach[3] = {0.2, 0.3, 0.3};
    gsl_vector_view start = gsl_vector_view_array(at, 3), step = gsl_vector_view_array(reach, 3);
    gsl_multimin_function f = {simplex_height, 3, (void *)search};
    gsl_multimin_fminimizer_set(m, &f, &start.vector, &step.vector);
    for (int i = 0; i < 300; i++) {
        if (gsl_multimin_fminimizer_iterate(m) != 0) break;
        if (gsl_multimin_fminimizer_size(m) < 1e-3) break;
    }
    for (size_t i = 0; i < 3; i++) at[i] = gsl_vector_get(gsl_multimin_fminimizer_x(m), i);
    gsl_multimin_fminimizer_free(m);
}

/* Blur stronger than noise and few frames may leave no covariance at the start: less blur then. */
static bool find_footing(const RfSearch *search, double *at)
{
    for (int attempt = 0; attempt < 8; attempt++) {
        if (value_at(search, at) > IMPOSSIBLE) return true;
        at[1] = at[2] = at[1] + 0.1;
    }
    return false;
}

bool rf_search_climb(const RfSearch *search, RfSearchPoint *point)
{
    if (!find_footing(search, point->at)) return false;
    Climb end = newton(search, point);
    if (end != CLIMB_DONE) {
        simplex(search, point->at);
        end = newton(search, point);
    }
    if (end != CLIMB_DONE) return false;
    rf_search_fall_axis(search, point->at[0], point->at[1], &point->fall);
    rf_search_across_axis(search, point->at[0], point->at[2], &point->across);
    return true;
}
