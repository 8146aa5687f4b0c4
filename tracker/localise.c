#include "tracker/localise.h"

#include "tracker/spot_normal.h"

#include <math.h>
#include <string.h>

enum { PER_SPOT = RF_NORMAL_PER_SPOT, MOST = RF_NORMAL_MOST, STEPS = 30, ROUNDS = 4, HASTY_STEPS = 8 };
enum { X = RF_NORMAL_X, Y = RF_NORMAL_Y, PEAK = RF_NORMAL_PEAK, WIDTH = RF_NORMAL_WIDTH };

static const double WIDTH_PRIOR = 0.7;  /* sd of ln width around the expected one */
static const double OFFSET_PRIOR = 0.3; /* sd of the local offset, in noise sd of one pixel */

/* The equations with the priors' share, and what the fit makes smaller. */
typedef struct {
    RfNormal sums;
    double cost;
} Normal;

typedef struct {
    const RfLocaliser *localiser;
    RfPatchColumns *columns;
    unsigned n;
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

static void add_priors(const Problem *problem, const State *state, Normal *normal)
{
    RfNormal *sums = &normal->sums;
    unsigned last = unknowns(problem) - 1;
    normal->cost = sums->chi_square;
    for (unsigned i = 0; i < problem->n; i++) {
        double width = state->spots[i].width_px, off = log(problem->localiser->expected_width_px / width);
        unsigned k = i * PER_SPOT + WIDTH;
        sums->matrix[k][k] += 1 / (width * width * WIDTH_PRIOR * WIDTH_PRIOR);
        sums->right[k] += off / (width * WIDTH_PRIOR * WIDTH_PRIOR);
        normal->cost += off * off / (WIDTH_PRIOR * WIDTH_PRIOR);
    }
    sums->matrix[last][last] += 1 / problem->offset_var;
    sums->right[last] -= state->offset / problem->offset_var;
    normal->cost += state->offset * state->offset / problem->offset_var;
}

/* Normal equations at a state, and the model's value at every pixel. */
static void gather(const Problem *problem, const State *state, Normal *normal)
{
    rf_spot_normal_gather(problem->localiser, problem->columns, state->spots, problem->n, state->offset,
                          &normal->sums);
    add_priors(problem, state, normal);
}

static void weigh(const Problem *problem)
{
    rf_spot_normal_weigh(problem->columns, problem->localiser->var_factor,
                         problem->localiser->photon_var_per_level);
}

static void copy_equations(const Problem *problem, const Normal *normal, double matrix[MOST][MOST], double *d)
{
    for (unsigned i = 0; i < unknowns(problem); i++) {
        memcpy(matrix[i], normal->sums.matrix[i], (i + 1) * sizeof(double));
        if (d) d[i] = normal->sums.right[i];
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

/* So many standard uncertainties; of the unknowns on which a place hardly depends, five times as many. */
static bool is_small(const Problem *problem, const double *d, const Normal *normal, double share)
{
    for (unsigned i = 0; i < unknowns(problem); i++) {
        bool is_place = i < problem->n * PER_SPOT && (i % PER_SPOT == X || i % PER_SPOT == Y);
        double limit = is_place ? share : 5 * share;
        if (d[i] * d[i] * normal->sums.matrix[i][i] > limit * limit) return false;
    }
    return true;
}

/* Levenberg-Marquardt with the weights as they are. How many steps it took; -1 where it didn't settle. `normal` and the
 * columns' models are those of the final state. */
static int descend(const Problem *problem, State *state, Normal *normal)
{
    double damping = 1e-4;
    for (int step = 0; step < STEPS; step++) {
        double factor[MOST][MOST], d[MOST];
        Normal trial;
        copy_equations(problem, normal, factor, d);
        if (!factorise(factor, unknowns(problem), damping)) {
            damping = MAX(10 * damping, 1e-3);
            continue;
        }
        substitute(factor, unknowns(problem), d);
        bool is_last = is_small(problem, d, normal, 0.03);
        State next = moved(problem, state, d);
        gather(problem, &next, &trial);
        /* where widths of the table meet, slopes jump a little: such steps may go to and fro for nothing */
        is_last |= fabs(trial.cost - normal->cost) < 3e-3;
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
static bool alternate(const Problem *problem, State *state, Normal *normal)
{
    rf_spot_normal_model(problem->localiser, problem->columns, state->spots, problem->n);
    for (int round = 0; round < ROUNDS; round++) {
        weigh(problem);
        gather(problem, state, normal);
        int steps = descend(problem, state, normal);
        if (steps < 0) return false;
        if (steps == 0 && round > 0) break;
    }
    return true;
}

/* What a last, small step takes from the cost, by the linear equations that it solves. */
static double expected_gain(const Problem *problem, const Normal *normal, const double *d)
{
    double gain = 0;
    for (unsigned i = 0; i < unknowns(problem); i++) gain += d[i] * normal->sums.right[i];
    return gain;
}

static double element(const Normal *normal, unsigned i, unsigned j)
{
    return i > j ? normal->sums.matrix[i][j] : normal->sums.matrix[j][i];
}

/* The other unknowns' equations with every spot as bright as its place and width make it now. */
static void rescale(const Problem *problem, Normal *normal, const double *ratios)
{
    for (unsigned i = 0; i < problem->n * PER_SPOT; i++) {
        double factor = i % PER_SPOT == PEAK ? 1 : ratios[i / PER_SPOT];
        normal->sums.right[i] *= factor;
        for (unsigned j = 0; j < unknowns(problem); j++) {
            if (j <= i) normal->sums.matrix[i][j] *= factor;
            if (j >= i) normal->sums.matrix[j][i] *= factor;
        }
    }
}

/* Peaks and offset enter linearly, so their best values at the first guess of places and widths follow from the equations
 * at hand. A guess too faint would throw places and widths far off. */
static void settle_peaks(const Problem *problem, State *state, Normal *normal)
{
    unsigned m = problem->n + 1, which[RF_LOCALISE_MOST_SPOTS + 1];
    double factor[MOST][MOST], z[MOST], ratios[RF_LOCALISE_MOST_SPOTS];
    for (unsigned i = 0; i < m; i++) which[i] = i < problem->n ? i * PER_SPOT + PEAK : problem->n * PER_SPOT;
    for (unsigned i = 0; i < m; i++) {
        z[i] = normal->sums.right[which[i]];
        for (unsigned j = 0; j <= i; j++) factor[i][j] = element(normal, which[i], which[j]);
    }
    if (!factorise(factor, m, 1e-6)) return;
    substitute(factor, m, z);
    for (unsigned i = 0; i < problem->n; i++) {
        double peak = state->spots[i].peak;
        ratios[i] = (peak + z[i]) / peak;
        if (!(ratios[i] > 0.1 && ratios[i] < 100)) return; /* no spot, or none by itself: as guessed */
    }
    for (unsigned i = 0; i < problem->n; i++) state->spots[i].peak += z[i];
    state->offset += z[problem->n];
    for (unsigned i = 0; i < unknowns(problem); i++)
        for (unsigned k = 0; k < m; k++) normal->sums.right[i] -= element(normal, i, which[k]) * z[k];
    rescale(problem, normal, ratios);
}

/* Plain Gauss-Newton, the weights a step behind: three or four steps do for nearly every spot. Each step squares the error
 * of the one before, so that after one of a tenth of the uncertainty nothing is left to gain. */
static bool hurry(const Problem *problem, State *state, Normal *normal)
{
    rf_spot_normal_weigh(problem->columns, problem->localiser->var_factor, 0);
    gather(problem, state, normal);
    settle_peaks(problem, state, normal);
    for (int step = 0; step < HASTY_STEPS; step++) {
        double factor[MOST][MOST], d[MOST];
        copy_equations(problem, normal, factor, d);
        if (!factorise(factor, unknowns(problem), 1e-6)) return false;
        substitute(factor, unknowns(problem), d);
        *state = moved(problem, state, d);
        if (step > 0 && is_small(problem, d, normal, 0.06)) {
            normal->sums.chi_square -= expected_gain(problem, normal, d);
            return true;
        }
        weigh(problem);
        gather(problem, state, normal);
    }
    return false;
}

static bool fill_covariance(const Problem *problem, State *state, const Normal *normal)
{
    double factor[MOST][MOST];
    unsigned m = unknowns(problem);
    copy_equations(problem, normal, factor, NULL);
    if (!factorise(factor, m, 0)) return false;
    for (unsigned i = 0; i < problem->n; i++) {
        RfSpotFit *spot = &state->spots[i];
        unsigned first = i * PER_SPOT;
        double column[MOST] = {0};
        column[first + X] = 1;
        substitute(factor, m, column);
        spot->var_x_px2 = column[first + X];
        spot->cov_xy_px2 = column[first + Y];
        memset(column, 0, sizeof column);
        column[first + Y] = 1;
        substitute(factor, m, column);
        spot->var_y_px2 = column[first + Y];
        memset(column, 0, sizeof column);
        column[first + PEAK] = 1;
        substitute(factor, m, column);
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
    RfPatchColumns columns;
    rf_spot_normal_fill(&columns, pixels, n_pixels);
    Problem problem = {localiser, &columns, n,
                       OFFSET_PRIOR * OFFSET_PRIOR * localiser->var_factor * mean_var(pixels, n_pixels)};
    State state = {0};
    Normal normal;
    memcpy(state.spots, spots, n * sizeof *spots);
    State start = state;
    bool is_converged = hurry(&problem, &state, &normal);
    if (!is_converged) {
        state = start;
        is_converged = alternate(&problem, &state, &normal);
    }
    outcome.is_converged = is_converged && fill_covariance(&problem, &state, &normal);
    outcome.chi_square = normal.sums.chi_square;
    outcome.offset = state.offset;
    memcpy(spots, state.spots, n * sizeof *spots);
    return outcome;
}

void rf_localise_models(const RfLocaliser *localiser, const RfSpotFit *spots, unsigned n,
                        const RfPatchPixel *pixels, unsigned n_pixels, float *models)
{
    RfPatchColumns columns;
    if (!n_pixels) return;
    rf_spot_normal_fill(&columns, pixels, n_pixels);
    rf_spot_normal_model(localiser, &columns, spots, n);
    memcpy(models, columns.model, n_pixels * sizeof *models);
}

double rf_localise_model(const RfLocaliser *localiser, const RfSpotFit *spots, unsigned n,
                         const RfPatchPixel *pixel)
{
    double sum = 0;
    for (unsigned i = 0; i < n; i++) {
        double dx = ((double)pixel->x_px - spots[i].x_px) * localiser->pixel_aspect,
               dy = (double)pixel->y_px - spots[i].y_px;
        RfSpotProfile profile = rf_spot_shape_profile(localiser->shape, spots[i].width_px);
        sum += spots[i].peak * (double)rf_spot_profile_at(&profile, (float)(dx * dx + dy * dy)).value;
    }
    return (double)pixel->shade * sum;
}
