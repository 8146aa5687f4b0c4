#include "tracker/localise.h"

#include <math.h>
#include <string.h>

enum { PER_SPOT = 4, MOST = RF_LOCALISE_MOST_SPOTS * PER_SPOT + 1, STEPS = 30 };
enum { X, Y, PEAK, WIDTH }; /* of one spot's unknowns; the common offset comes last of all */

static const double WIDTH_PRIOR = 0.7;  /* sd of ln width around the expected one */
static const double OFFSET_PRIOR = 0.3; /* sd of the local offset, in noise sd of one pixel */

typedef struct {
    double matrix[MOST][MOST], right[MOST];
    double cost; /* chi-square with the priors' share */
    double chi_square;
} Normal;

typedef struct {
    const RfLocaliser *localiser;
    const RfPatchPixel *pixels;
    unsigned n_pixels, n;
    double offset_var;
} Problem;

typedef struct {
    RfSpotFit spots[RF_LOCALISE_MOST_SPOTS];
    double offset;
} State;

static unsigned unknowns(const Problem *problem)
{
    return problem->n * PER_SPOT + 1;
}

/* Model and its gradient at one pixel; the unknowns of a spot too far to matter get a zero gradient. */
static double model_at(const Problem *problem, const State *state, const RfSpotProfile *profiles,
                       const RfPatchPixel *pixel, double *gradient)
{
    double aspect = problem->localiser->pixel_aspect, shade = (double)pixel->shade, sum = 0;
    for (unsigned i = 0; i < problem->n; i++) {
        const RfSpotFit *spot = &state->spots[i];
        double dx = ((double)pixel->x_px - spot->x_px) * aspect, dy = (double)pixel->y_px - spot->y_px;
        RfSpotValue at = rf_spot_profile_at(&profiles[i], (float)(dx * dx + dy * dy));
        double *g = gradient + i * PER_SPOT, slope = -shade * spot->peak * (double)at.per_r2;
        g[X] = slope * dx * aspect;
        g[Y] = slope * dy;
        g[PEAK] = shade * (double)at.value;
        g[WIDTH] = shade * spot->peak * (double)at.per_width;
        sum += spot->peak * g[PEAK];
    }
    gradient[problem->n * PER_SPOT] = 1;
    return sum;
}

static void add_priors(const Problem *problem, const State *state, Normal *normal)
{
    unsigned last = unknowns(problem) - 1;
    for (unsigned i = 0; i < problem->n; i++) {
        double width = state->spots[i].width_px, off = log(problem->localiser->expected_width_px / width);
        unsigned k = i * PER_SPOT + WIDTH;
        normal->matrix[k][k] += 1 / (width * width * WIDTH_PRIOR * WIDTH_PRIOR);
        normal->right[k] += off / (width * WIDTH_PRIOR * WIDTH_PRIOR);
        normal->cost += off * off / (WIDTH_PRIOR * WIDTH_PRIOR);
    }
    normal->matrix[last][last] += 1 / problem->offset_var;
    normal->right[last] -= state->offset / problem->offset_var;
    normal->cost += state->offset * state->offset / problem->offset_var;
}

/* Weights come from `weighing`, the state of the step before, so that the cost of two trials can be compared. */
static void gather(const Problem *problem, const State *state, const float *weights, bool with_matrix,
                   Normal *normal)
{
    unsigned m = unknowns(problem);
    RfSpotProfile profiles[RF_LOCALISE_MOST_SPOTS];
    for (unsigned i = 0; i < problem->n; i++)
        profiles[i] = rf_spot_shape_profile(problem->localiser->shape, state->spots[i].width_px);
    memset(normal, 0, sizeof *normal);
    for (unsigned p = 0; p < problem->n_pixels; p++) {
        double g[MOST], weight = (double)weights[p];
        double residual = (double)problem->pixels[p].excess - state->offset -
                          model_at(problem, state, profiles, &problem->pixels[p], g);
        normal->chi_square += weight * residual * residual;
        for (unsigned i = 0; with_matrix && i < m; i++) {
            double wg = weight * g[i];
            for (unsigned j = 0; j <= i; j++) normal->matrix[i][j] += wg * g[j];
            normal->right[i] += wg * residual;
        }
    }
    normal->cost = normal->chi_square;
    add_priors(problem, state, normal);
}

static void weigh(const Problem *problem, const State *state, float *weights)
{
    RfSpotProfile profiles[RF_LOCALISE_MOST_SPOTS];
    double g[MOST];
    for (unsigned i = 0; i < problem->n; i++)
        profiles[i] = rf_spot_shape_profile(problem->localiser->shape, state->spots[i].width_px);
    for (unsigned p = 0; p < problem->n_pixels; p++) {
        double model = model_at(problem, state, profiles, &problem->pixels[p], g);
        weights[p] = (float)(1 / (problem->localiser->var_factor * (double)problem->pixels[p].var +
                                  problem->localiser->photon_var_per_level * fmax(model, 0)));
    }
}

/* Cholesky of the damped matrix, lower triangle; false where it isn't positive definite. */
static bool factorise(double matrix[MOST][MOST], unsigned m, double damping)
{
    for (unsigned i = 0; i < m; i++) matrix[i][i] *= 1 + damping;
    for (unsigned j = 0; j < m; j++) {
        for (unsigned k = 0; k < j; k++) matrix[j][j] -= matrix[j][k] * matrix[j][k];
        if (!(matrix[j][j] > 0)) return false;
        matrix[j][j] = sqrt(matrix[j][j]);
        for (unsigned i = j + 1; i < m; i++) {
            for (unsigned k = 0; k < j; k++) matrix[i][j] -= matrix[i][k] * matrix[j][k];
            matrix[i][j] /= matrix[j][j];
        }
    }
    return true;
}

static void substitute(double l[MOST][MOST], unsigned m, double *z)
{
    for (unsigned i = 0; i < m; i++) {
        for (unsigned k = 0; k < i; k++) z[i] -= l[i][k] * z[k];
        z[i] /= l[i][i];
    }
    for (unsigned i = m; i-- > 0;) {
        for (unsigned k = i + 1; k < m; k++) z[i] -= l[k][i] * z[k];
        z[i] /= l[i][i];
    }
}

/* A step may not throw a spot further than its own width, nor change the width by more than half. */
static State moved(const Problem *problem, const State *state, const double *d)
{
    State next = *state;
    double widest = rf_spot_shape_widest_px(problem->localiser->shape);
    for (unsigned i = 0; i < problem->n; i++) {
        RfSpotFit *spot = &next.spots[i];
        const double *step = d + i * PER_SPOT;
        double reach = spot->width_px;
        spot->x_px += CLAMP(step[X], -reach, reach);
        spot->y_px += CLAMP(step[Y], -reach, reach);
        spot->peak += step[PEAK];
        spot->width_px = CLAMP(spot->width_px + CLAMP(step[WIDTH], -0.5 * reach, 0.5 * reach), 0.4, widest);
    }
    next.offset += d[problem->n * PER_SPOT];
    return next;
}

static bool is_small(const Problem *problem, const double *d, const Normal *normal)
{
    for (unsigned i = 0; i < unknowns(problem); i++)
        if (d[i] * d[i] * normal->matrix[i][i] > 1e-6) /* a thousandth of a standard uncertainty */
            return false;
    return true;
}

/* Levenberg-Marquardt; weights follow the model after each accepted step (iteratively reweighted). */
static bool descend(const Problem *problem, State *state, float *weights)
{
    double damping = 1e-4;
    Normal normal, trial;
    weigh(problem, state, weights);
    gather(problem, state, weights, true, &normal);
    for (int step = 0; step < STEPS; step++) {
        Normal factor = normal;
        double d[MOST];
        memcpy(d, normal.right, sizeof d);
        if (!factorise(factor.matrix, unknowns(problem), damping)) {
            damping = MAX(10 * damping, 1e-3);
            continue;
        }
        substitute(factor.matrix, unknowns(problem), d);
        State next = moved(problem, state, d);
        gather(problem, &next, weights, false, &trial);
        if (trial.cost > normal.cost * (1 + 1e-9)) {
            if (is_small(problem, d, &normal)) return true;
            damping *= 8;
            continue;
        }
        *state = next;
        damping = MAX(damping / 6, 1e-7);
        if (is_small(problem, d, &normal)) return true;
        weigh(problem, state, weights);
        gather(problem, state, weights, true, &normal);
    }
    return false;
}

static bool fill_covariance(const Problem *problem, State *state, const Normal *normal)
{
    Normal factor = *normal;
    unsigned m = unknowns(problem);
    if (!factorise(factor.matrix, m, 0)) return false;
    for (unsigned i = 0; i < problem->n; i++) {
        RfSpotFit *spot = &state->spots[i];
        unsigned first = i * PER_SPOT;
        double column[MOST] = {0};
        column[first + X] = 1;
        substitute(factor.matrix, m, column);
        spot->var_x_px2 = column[first + X];
        spot->cov_xy_px2 = column[first + Y];
        memset(column, 0, sizeof column);
        column[first + Y] = 1;
        substitute(factor.matrix, m, column);
        spot->var_y_px2 = column[first + Y];
        memset(column, 0, sizeof column);
        column[first + PEAK] = 1;
        substitute(factor.matrix, m, column);
        spot->u_peak = sqrt(column[first + PEAK]);
    }
    return true;
}

static double mean_var(const RfPatchPixel *pixels, unsigned n)
{
    double sum = 0;
    for (unsigned i = 0; i < n; i++) sum += (double)pixels[i].var;
    return sum / n;
}

RfLocaliseOutcome rf_localise(const RfLocaliser *localiser, const RfPatchPixel *pixels, unsigned n_pixels,
                              RfSpotFit *spots, unsigned n)
{
    g_assert(n >= 1 && n <= RF_LOCALISE_MOST_SPOTS && n_pixels <= RF_LOCALISE_MOST_PIXELS);
    RfLocaliseOutcome outcome = {0};
    if (n_pixels < n * PER_SPOT + 4) return outcome;
    Problem problem = {localiser, pixels, n_pixels, n,
                       OFFSET_PRIOR * OFFSET_PRIOR * localiser->var_factor * mean_var(pixels, n_pixels)};
    State state = {0};
    float weights[RF_LOCALISE_MOST_PIXELS];
    memcpy(state.spots, spots, n * sizeof *spots);
    bool is_converged = descend(&problem, &state, weights);
    Normal normal;
    weigh(&problem, &state, weights);
    gather(&problem, &state, weights, true, &normal);
    outcome.is_converged = is_converged && fill_covariance(&problem, &state, &normal);
    outcome.chi_square = normal.chi_square;
    outcome.offset = state.offset;
    memcpy(spots, state.spots, n * sizeof *spots);
    return outcome;
}

double rf_localise_model(const RfLocaliser *localiser, const RfSpotFit *spots, unsigned n,
                         const RfPatchPixel *pixel)
{
    Problem problem = {.localiser = localiser, .n = n};
    State state = {0};
    RfSpotProfile profiles[RF_LOCALISE_MOST_SPOTS];
    double g[MOST];
    memcpy(state.spots, spots, n * sizeof *spots);
    for (unsigned i = 0; i < n; i++) profiles[i] = rf_spot_shape_profile(localiser->shape, spots[i].width_px);
    return model_at(&problem, &state, profiles, pixel, g);
}
