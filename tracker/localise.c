#include "tracker/localise.h"

#include <math.h>
#include <string.h>

enum { PER_SPOT = 4, MOST = RF_LOCALISE_MOST_SPOTS * PER_SPOT + 1, STEPS = 30, ROUNDS = 4, HASTY_STEPS = 9 };
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

typedef struct {
    float weights[RF_LOCALISE_MOST_PIXELS]; /* 1 / variance */
    float models[RF_LOCALISE_MOST_PIXELS];  /* of the state gathered last */
} PixelTable;

static inline void accumulate(Normal *normal, const double *g, double weight, double residual, unsigned m)
{
    for (unsigned i = 0; i < m; i++) {
        double wg = weight * g[i];
        if (wg == 0) continue; /* a spot too far away to matter */
        for (unsigned j = 0; j <= i; j++) normal->matrix[i][j] += wg * g[j];
        normal->right[i] += wg * residual;
    }
}

/* Normal equations at a state, and the model's value at every pixel. */
static void gather(const Problem *problem, const State *state, PixelTable *table, Normal *normal)
{
    unsigned m = unknowns(problem);
    RfSpotProfile profiles[RF_LOCALISE_MOST_SPOTS];
    for (unsigned i = 0; i < problem->n; i++)
        profiles[i] = rf_spot_shape_profile(problem->localiser->shape, state->spots[i].width_px);
    memset(normal, 0, sizeof *normal);
    for (unsigned p = 0; p < problem->n_pixels; p++) {
        double g[MOST], weight = (double)table->weights[p];
        double model = model_at(problem, state, profiles, &problem->pixels[p], g);
        double residual = (double)problem->pixels[p].excess - state->offset - model;
        table->models[p] = (float)model;
        normal->chi_square += weight * residual * residual;
        if (m == PER_SPOT + 1)
            accumulate(normal, g, weight, residual, PER_SPOT + 1); /* the usual case, its loops unrolled */
        else
            accumulate(normal, g, weight, residual, m);
    }
    normal->cost = normal->chi_square;
    add_priors(problem, state, normal);
}

static void weigh(const Problem *problem, PixelTable *table)
{
    double factor = problem->localiser->var_factor, photon = problem->localiser->photon_var_per_level;
    for (unsigned p = 0; p < problem->n_pixels; p++) {
        double light = fmax((double)table->models[p], 0);
        table->weights[p] = (float)(1 / (factor * (double)problem->pixels[p].var + photon * light));
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

/* A hundredth of a standard uncertainty; of the width, on which a place hardly depends, a twentieth. */
static bool is_small(const Problem *problem, const double *d, const Normal *normal)
{
    for (unsigned i = 0; i < unknowns(problem); i++) {
        bool is_width = i % PER_SPOT == WIDTH && i < problem->n * PER_SPOT;
        if (d[i] * d[i] * normal->matrix[i][i] > (is_width ? 2.5e-3 : 1e-4)) return false;
    }
    return true;
}

/* Levenberg-Marquardt with the weights as they are. How many steps it took; -1 where it didn't settle. `normal` and the
 * table's models are those of the final state. */
static int descend(const Problem *problem, State *state, PixelTable *table, Normal *normal)
{
    double damping = 1e-4;
    for (int step = 0; step < STEPS; step++) {
        Normal factor = *normal, trial;
        double d[MOST];
        memcpy(d, normal->right, sizeof d);
        if (!factorise(factor.matrix, unknowns(problem), damping)) {
            damping = MAX(10 * damping, 1e-3);
            continue;
        }
        substitute(factor.matrix, unknowns(problem), d);
        bool is_last = is_small(problem, d, normal);
        State next = moved(problem, state, d);
        gather(problem, &next, table, &trial);
        /* where widths of the table meet, slopes jump a little: such steps may go to and fro for nothing */
        is_last |= fabs(trial.cost - normal->cost) < 3e-4;
        if (trial.cost <= normal->cost * (1 + 1e-9)) {
            *state = next;
            *normal = trial;
            damping = MAX(damping / 6, 1e-7);
        } else if (damping > 1e3) {
            return step; /* nothing better in any direction: a minimum to the accuracy of the table */
        } else {
            damping *= 8;
        }
        if (is_last) return step;
    }
    return -1;
}

/* Weights follow the model, and the model the weights (iteratively reweighted least squares), until they agree. */
static bool alternate(const Problem *problem, State *state, PixelTable *table, Normal *normal)
{
    for (unsigned p = 0; p < problem->n_pixels; p++) table->weights[p] = 1;
    gather(problem, state, table, normal); /* for the models only */
    for (int round = 0; round < ROUNDS; round++) {
        weigh(problem, table);
        gather(problem, state, table, normal);
        int steps = descend(problem, state, table, normal);
        if (steps < 0) return false;
        if (steps == 0 && round > 0) break;
    }
    return true;
}

/* Plain Gauss-Newton, the weights a step behind: four or five steps do for nearly every spot. */
static bool hurry(const Problem *problem, State *state, PixelTable *table, Normal *normal)
{
    for (unsigned p = 0; p < problem->n_pixels; p++) table->weights[p] = 1 / problem->pixels[p].var;
    gather(problem, state, table, normal);
    for (int step = 0; step < HASTY_STEPS; step++) {
        Normal factor = *normal;
        double d[MOST];
        memcpy(d, normal->right, sizeof d);
        if (!factorise(factor.matrix, unknowns(problem), 1e-6)) return false;
        substitute(factor.matrix, unknowns(problem), d);
        bool is_last = step > 0 && is_small(problem, d, normal);
        *state = moved(problem, state, d);
        weigh(problem, table);
        gather(problem, state, table, normal);
        if (is_last) return true;
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
    PixelTable table;
    Normal normal;
    memcpy(state.spots, spots, n * sizeof *spots);
    State start = state;
    bool is_converged = hurry(&problem, &state, &table, &normal);
    if (!is_converged) {
        state = start;
        is_converged = alternate(&problem, &state, &table, &normal);
    }
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
