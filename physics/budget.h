/* Uncertainty of a result from the uncertainties of its inputs, in two ways side by side: the law of propagation
 * (JCGM 100:2008, 5.1 and 5.2, first order) and propagation of distributions by Monte Carlo (JCGM 101:2008). Where the
 * model bends within the inputs' uncertainties the two differ, and the second is right. Knows nothing of droplets:
 * charge_budget.h does. */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

typedef enum {
    RF_SPREAD_NORMAL,
    RF_SPREAD_RECTANGULAR, /* half-width sqrt(3) sigma */
} RfSpread;

typedef struct {
    const char *name; /* (borrowed, lives as long as the budget) */
    double value;
    double sigma; /* one standard uncertainty; 0: exact */
    RfSpread spread;
    double degrees_of_freedom; /* 0: infinite; read by the Welch-Satterthwaite formula only */
    bool is_common;            /* shared by all results of its kind: doesn't average out */
} RfBudgetInput;

/* The model: false where it has no value (then that draw is left out and counted). Must not change between calls. */
typedef bool (*RfBudgetModel)(const double *inputs, const void *context, double *result);

typedef struct {
    size_t draws;      /* of the Monte Carlo; 0: none */
    size_t part_draws; /* of the Monte Carlo of each input alone; 0: none */
    uint64_t seed;
    double coverage; /* of the intervals, e.g. 0.95 */
} RfBudgetOptions;

/* 100 000 draws, 10 000 for each input, a fixed seed, 0.95. */
extern const RfBudgetOptions RF_BUDGET_DEFAULTS;

typedef struct {
    double sensitivity;  /* d result/d input at the estimates */
    double contribution; /* sensitivity times sigma, signed, unit of the result (JCGM 100) */
    double mc_sigma; /* standard deviation with only this input varied (JCGM 101); negative: not computed */
} RfBudgetPart;

typedef struct {
    double value; /* model at the estimates */
    double sigma; /* JCGM 100, first order, with correlations */
    double sigma_random,
        sigma_common; /* the same, from inputs of either kind; correlations between kinds in neither */
    double degrees_of_freedom; /* Welch-Satterthwaite, JCGM 100 G.4.1; 0: infinite */
    size_t n;
    RfBudgetPart *parts;        /* n, in the order of the inputs */
    size_t largest;             /* index of the largest |contribution| */
    size_t mc_draws, mc_failed; /* 0 draws: none of the following */
    double mc_mean, mc_sigma;
    double mc_low, mc_high;                   /* probabilistically symmetric coverage interval */
    double mc_shortest_low, mc_shortest_high; /* shortest coverage interval */
} RfBudget;

/* correlations: n x n row by row, or NULL for none; must be symmetric with unit diagonal and positive definite, and
 * correlated inputs must be normal. Refuses a negative sigma, a model without a value at the estimates, fewer than half
 * of the draws with one. (returns new) */
RfBudget *rf_budget_new(const RfBudgetInput *inputs, size_t n, const double *correlations,
                        RfBudgetModel model, const void *context, const RfBudgetOptions *options,
                        GError **error);
void rf_budget_free(RfBudget *budget);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfBudget, rf_budget_free)
