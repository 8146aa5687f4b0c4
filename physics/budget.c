#include "physics/budget.h"

#include <gsl/gsl_deriv.h>
#include <gsl/gsl_linalg.h>
#include <gsl/gsl_math.h>
#include <gsl/gsl_randist.h>
#include <gsl/gsl_rng.h>
#include <gsl/gsl_sort.h>
#include <gsl/gsl_statistics_double.h>
#include <math.h>
#include <string.h>

#include "physics/physics_error.h"

const RfBudgetOptions RF_BUDGET_DEFAULTS = {
    .draws = 100000, .part_draws = 10000, .seed = 101, /* any would do */ .coverage = 0.95};

typedef struct {
    const RfBudgetInput *inputs;
    size_t n;
    const double *correlations;
    RfBudgetModel model;
    const void *context;
    gsl_matrix *factor; /* Cholesky factor of the correlations, or NULL */
    gsl_rng *rng;
    double *x; /* scratch: one set of inputs */
} Problem;

static void at_estimates(Problem *problem)
{
    for (size_t i = 0; i < problem->n; i++) problem->x[i] = problem->inputs[i].value;
}

static bool evaluate(const Problem *problem, double *result)
{
    return problem->model(problem->x, problem->context, result) && isfinite(*result);
}

/* ---- law of propagation ---- */

typedef struct {
    Problem *problem;
    size_t input;
    bool has_failed;
} Direction;

static double along(double value, void *context)
{
    Direction *direction = context;
    Problem *problem = direction->problem;
    problem->x[direction->input] = value;
    double result = 0.0;
    if (!evaluate(problem, &result)) direction->has_failed = true;
    return result;
}

/* Steps of one sigma (JCGM 100, 5.1.3 note 2), refined by GSL's five-point rule; a tenth of that near a forbidden
 * region. */
static bool find_sensitivity(Problem *problem, size_t i, double *sensitivity)
{
    *sensitivity = 0.0;
    if (problem->inputs[i].sigma == 0.0) return true;
    for (double step = problem->inputs[i].sigma; step > 1e-4 * problem->inputs[i].sigma; step *= 0.1) {
        at_estimates(problem);
        Direction direction = {problem, i, false};
        gsl_function function = {along, &direction};
        double error = 0.0;
        gsl_deriv_central(&function, problem->inputs[i].value, step, sensitivity, &error);
        if (!direction.has_failed) return true;
    }
    return false;
}

static double correlation(const Problem *problem, size_t i, size_t j)
{
    if (i == j) return 1.0;
    return problem->correlations == NULL ? 0.0 : problem->correlations[i * problem->n + j];
}

static void combine(const Problem *problem, RfBudget *budget)
{
    double all = 0.0, random = 0.0, common = 0.0, satterthwaite = 0.0;
    for (size_t i = 0; i < problem->n; i++) {
        const double ci = budget->parts[i].contribution;
        if (fabs(ci) > fabs(budget->parts[budget->largest].contribution)) budget->largest = i;
        if (problem->inputs[i].degrees_of_freedom > 0.0)
            satterthwaite += ci * ci * ci * ci / problem->inputs[i].degrees_of_freedom;
        for (size_t j = 0; j < problem->n; j++) {
            const double product = correlation(problem, i, j) * ci * budget->parts[j].contribution;
            all += product;
            if (problem->inputs[i].is_common && problem->inputs[j].is_common) common += product;
            if (!problem->inputs[i].is_common && !problem->inputs[j].is_common) random += product;
        }
    }
    budget->sigma = sqrt(fmax(all, 0.0));
    budget->sigma_random = sqrt(fmax(random, 0.0));
    budget->sigma_common = sqrt(fmax(common, 0.0));
    budget->degrees_of_freedom = satterthwaite > 0.0 ? all * all / satterthwaite : 0.0;
}

static bool propagate(Problem *problem, RfBudget *budget, GError **error)
{
    at_estimates(problem);
    if (!evaluate(problem, &budget->value)) {
        g_set_error(error, RF_PHYSICS_ERROR, RF_PHYSICS_ERROR_RANGE,
                    "the model has no value at the estimates of its %zu inputs", problem->n);
        return false;
    }
    for (size_t i = 0; i < problem->n; i++) {
        if (!find_sensitivity(problem, i, &budget->parts[i].sensitivity)) {
            g_set_error(error, RF_PHYSICS_ERROR, RF_PHYSICS_ERROR_RANGE,
                        "the model has no value close to the estimate %.6g of %s", problem->inputs[i].value,
                        problem->inputs[i].name);
            return false;
        }
        budget->parts[i].contribution = budget->parts[i].sensitivity * problem->inputs[i].sigma;
        budget->parts[i].mc_sigma = -1.0;
    }
    combine(problem, budget);
    return true;
}

/* ---- propagation of distributions ---- */

static double standard_draw(const Problem *problem, size_t i)
{
    if (problem->inputs[i].spread == RF_SPREAD_RECTANGULAR)
        return gsl_ran_flat(problem->rng, -sqrt(3.0), sqrt(3.0));
    return gsl_ran_gaussian_ratio_method(problem->rng, 1.0);
}

static void draw_all(Problem *problem, double *standard)
{
    for (size_t i = 0; i < problem->n; i++) standard[i] = standard_draw(problem, i);
    for (size_t i = 0; i < problem->n; i++) {
        double z = standard[i];
        if (problem->factor != NULL) {
            z = 0.0;
            for (size_t j = 0; j <= i; j++) z += gsl_matrix_get(problem->factor, i, j) * standard[j];
        }
        problem->x[i] = problem->inputs[i].value + problem->inputs[i].sigma * z;
    }
}

static void intervals(const double *sorted, size_t n, double coverage, RfBudget *budget)
{
    budget->mc_low = gsl_stats_quantile_from_sorted_data(sorted, 1, n, 0.5 - 0.5 * coverage);
    budget->mc_high = gsl_stats_quantile_from_sorted_data(sorted, 1, n, 0.5 + 0.5 * coverage);
    /* JCGM 101, 7.7: among the intervals that hold the share, the shortest. */
    const size_t held = (size_t)(coverage * (double)n);
    budget->mc_shortest_low = sorted[0];
    budget->mc_shortest_high = sorted[MIN(held, n - 1)];
    for (size_t i = 0; i + held < n; i++) {
        if (sorted[i + held] - sorted[i] >= budget->mc_shortest_high - budget->mc_shortest_low) continue;
        budget->mc_shortest_low = sorted[i];
        budget->mc_shortest_high = sorted[i + held];
    }
}

static bool run_monte_carlo(Problem *problem, const RfBudgetOptions *options, RfBudget *budget,
                            GError **error)
{
    if (options->draws == 0) return true;
    g_autofree double *standard = g_new(double, problem->n);
    g_autofree double *results = g_new(double, options->draws);
    size_t n = 0;
    for (size_t draw = 0; draw < options->draws; draw++) {
        draw_all(problem, standard);
        if (evaluate(problem, &results[n])) n++;
    }
    budget->mc_draws = options->draws;
    budget->mc_failed = options->draws - n;
    if (n < 2 || 2 * n < options->draws) {
        g_set_error(error, RF_PHYSICS_ERROR, RF_PHYSICS_ERROR_RANGE,
                    "the model has a value for only %zu of %zu draws; need at least half", n, options->draws);
        return false;
    }
    budget->mc_mean = gsl_stats_mean(results, 1, n);
    budget->mc_sigma = gsl_stats_sd_m(results, 1, n, budget->mc_mean);
    gsl_sort(results, 1, n);
    intervals(results, n, options->coverage, budget);
    return true;
}

static void run_part(Problem *problem, size_t i, size_t draws, double *results, RfBudgetPart *part)
{
    at_estimates(problem);
    size_t n = 0;
    for (size_t draw = 0; draw < draws; draw++) {
        problem->x[i] = problem->inputs[i].value + problem->inputs[i].sigma * standard_draw(problem, i);
        if (evaluate(problem, &results[n])) n++;
    }
    if (n >= 2) part->mc_sigma = gsl_stats_sd(results, 1, n);
}

static void run_parts(Problem *problem, size_t draws, RfBudget *budget)
{
    if (draws == 0) return;
    g_autofree double *results = g_new(double, draws);
    for (size_t i = 0; i < problem->n; i++) {
        if (problem->inputs[i].sigma == 0.0)
            budget->parts[i].mc_sigma = 0.0;
        else
            run_part(problem, i, draws, results, &budget->parts[i]);
    }
}

/* ---- input ---- */

static bool check_sigmas(const RfBudgetInput *inputs, size_t n, GError **error)
{
    for (size_t i = 0; i < n; i++) {
        if (isfinite(inputs[i].value) && isfinite(inputs[i].sigma) && inputs[i].sigma >= 0.0) continue;
        g_set_error(error, RF_PHYSICS_ERROR, RF_PHYSICS_ERROR_RANGE,
                    "%s is %.6g with sigma %.6g; need finite values and a sigma of at least 0",
                    inputs[i].name, inputs[i].value, inputs[i].sigma);
        return false;
    }
    return true;
}

static bool check_correlated_are_normal(const Problem *problem, GError **error)
{
    for (size_t i = 0; i < problem->n; i++) {
        for (size_t j = 0; j < problem->n; j++) {
            if (i == j || correlation(problem, i, j) == 0.0) continue;
            if (problem->inputs[i].spread == RF_SPREAD_NORMAL) continue;
            g_set_error(error, RF_PHYSICS_ERROR, RF_PHYSICS_ERROR_SHAPE,
                        "%s is correlated with %s but not normal; need normal inputs",
                        problem->inputs[i].name, problem->inputs[j].name);
            return false;
        }
    }
    return true;
}

static bool factor_correlations(Problem *problem, GError **error)
{
    if (problem->correlations == NULL) return true;
    if (!check_correlated_are_normal(problem, error)) return false;
    problem->factor = gsl_matrix_alloc(problem->n, problem->n);
    memcpy(problem->factor->data, problem->correlations, problem->n * problem->n * sizeof(double));
    if (gsl_linalg_cholesky_decomp1(problem->factor) == GSL_SUCCESS) return true;
    g_set_error(
        error, RF_PHYSICS_ERROR, RF_PHYSICS_ERROR_SHAPE,
        "correlations of %zu inputs are not positive definite; need coefficients that can occur together",
        problem->n);
    return false;
}

RfBudget *rf_budget_new(const RfBudgetInput *inputs, size_t n, const double *correlations,
                        RfBudgetModel model, const void *context, const RfBudgetOptions *options,
                        GError **error)
{
    if (!check_sigmas(inputs, n, error)) return NULL;
    g_autofree double *x = g_new0(double, n + 1);
    g_autoptr(RfBudget) budget = g_new0(RfBudget, 1);
    budget->n = n;
    budget->parts = g_new0(RfBudgetPart, n + 1);
    Problem problem = {inputs, n, correlations, model, context, NULL, NULL, x};
    problem.rng = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(problem.rng, (unsigned long)options->seed);

    const bool is_done = factor_correlations(&problem, error) && propagate(&problem, budget, error) &&
                         run_monte_carlo(&problem, options, budget, error);
    if (is_done) run_parts(&problem, options->part_draws, budget);
    gsl_rng_free(problem.rng);
    if (problem.factor != NULL) gsl_matrix_free(problem.factor);
    return is_done ? g_steal_pointer(&budget) : NULL;
}

void rf_budget_free(RfBudget *budget)
{
    if (budget == NULL) return;
    g_free(budget->parts);
    g_free(budget);
}
