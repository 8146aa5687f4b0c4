/* Coverage of the pooled unit on simulated benches whose gap, laws, oil and scale are off together, and whether one
 * recording that is off is found. Prints figures, judges nothing. Argument: number of pools (1000). */
#include <gsl/gsl_errno.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>

#include "physics/constants.h"
#include "tests/support/simulated_benches.h"

typedef struct {
    const char *name;
    Benches benches;
    double shift;
} Case;

static const Case CASES[] = {
    {"six recordings of ten droplets", {6, 10, 9, 0.03, 0.10, 2, 3}, 0.0},
    {"one reticle for all", {8, 10, 9, 0.03, 0.10, 4, 8}, 0.0},
    {"twenty recordings of three droplets", {20, 3, 9, 0.03, 0.10, 5, 1}, 0.0},
    {"a recording alone", {1, 25, 9, 0.03, 0.10, 1, 1}, 0.0},
    {"highly charged", {10, 8, 30, 0.03, 0.10, 5, 5}, 0.0},
    {"scale of one off by 3 %", {10, 10, 9, 0.03, 0.10, 5, 1}, 0.03},
};

typedef struct {
    int pools, resolved, in_68, in_95, near, found, alarms, random_68;
    double pull2, chi_squared_share;
} Tally;

static void add(Tally *tally, const RfPooledUnit *unit)
{
    tally->pools++;
    if (!unit->is_resolved) return;
    const double off = unit->unit_coulomb.value - RF_ELEMENTARY_CHARGE_COULOMB,
                 pull = off / unit->unit_coulomb.sigma;
    tally->resolved++;
    if (fabs(off) > 0.1 * RF_ELEMENTARY_CHARGE_COULOMB) return;
    tally->near++;
    tally->in_68 += fabs(pull) < 1.0;
    tally->in_95 += fabs(pull) < 1.959964;
    tally->random_68 += fabs(off) < unit->u_random_coulomb;
    tally->pull2 += pull * pull;
    tally->alarms += unit->most_off_p < 0.01;
    tally->found += unit->most_off_p < 0.01 && unit->most_off == 0;
    tally->chi_squared_share += unit->p < 0.05;
}

static void run_case(const Case *one, int pools)
{
    gsl_rng *rng = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(rng, 12);
    Tally tally = {0};
    for (int i = 0; i < pools; i++) {
        BenchPool *pool = bench_pool_new(&one->benches, one->shift, rng);
        g_autoptr(RfPooledUnit) unit =
            rf_pooled_unit_new(pool->recordings, pool->n, pool->n_measurements, 0, NULL);
        add(&tally, unit);
        bench_pool_free(pool);
    }
    gsl_rng_free(rng);
    const double n = tally.near > 0 ? tally.near : 1;
    printf("%-36s resolved %4d of %d, wrong %d; within u %.1f %%, within 1.96 u %.1f %% (droplets' own u "
           "only: %.1f %%), "
           "pull %.2f; one off at p < 0.01: %.1f %%, of them the first: %.1f %%; chi-squared p < 0.05: %.1f "
           "%%\n",
           one->name, tally.resolved, tally.pools, tally.resolved - tally.near, 100 * tally.in_68 / n,
           100 * tally.in_95 / n, 100 * tally.random_68 / n, sqrt(tally.pull2 / n), 100 * tally.alarms / n,
           100 * tally.found / n, 100 * tally.chi_squared_share / n);
    fflush(stdout);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    const int pools = argc > 1 ? atoi(argv[1]) : 1000;
    for (size_t i = 0; i < sizeof CASES / sizeof *CASES; i++) run_case(&CASES[i], pools);
    return 0;
}
