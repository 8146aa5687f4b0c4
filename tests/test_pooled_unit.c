#include "physics/pooled_unit.h"

#include <glib.h>
#include <gsl/gsl_errno.h>
#include <math.h>
#include <string.h>

#include "physics/constants.h"
#include "physics/recording_unit.h"
#include "tests/support/simulated_benches.h"

static const double E = RF_ELEMENTARY_CHARGE_COULOMB;

static RfPooledUnit *unit_of(const RfPooledRecording *recordings, size_t n, size_t n_measurements)
{
    g_autoptr(GError) error = NULL;
    RfPooledUnit *unit = rf_pooled_unit_new(recordings, n, n_measurements, 0, &error);
    g_assert_no_error(error);
    return unit;
}

/* Charges at whole multiples of a unit, each with the same sigma and, for each input, a share of its value. */
static RfPooledRecording exact(double unit_coulomb, double sigma_units, const size_t *measurements,
                               const double *shares, size_t n_inputs)
{
    enum { N = 12 };
    RfValue *charges = g_new(RfValue, N);
    double *influences = g_new(double, N *n_inputs + 1);
    for (int i = 0; i < N; i++) {
        const int multiple = (1 + i % 7) * (i % 2 ? -1 : 1);
        charges[i] = (RfValue){multiple * unit_coulomb, sigma_units * E};
        for (size_t k = 0; k < n_inputs; k++) influences[i * n_inputs + k] = shares[k] * charges[i].value;
    }
    return (RfPooledRecording){N, charges, n_inputs, measurements, influences};
}

static void clear(RfPooledRecording *recordings, size_t n)
{
    for (size_t r = 0; r < n; r++) {
        g_free((void *)recordings[r].charges_coulomb);
        g_free((void *)recordings[r].influences_coulomb);
    }
}

/* A gap that all share doesn't average out; a gap measured anew for each does. Equal recordings: by hand. */
static void shared_stays_own_averages(void)
{
    const size_t same[] = {0}, others[4][1] = {{0}, {1}, {2}, {3}};
    const double share[] = {0.004};
    RfPooledRecording shared[4], own[4];
    for (int r = 0; r < 4; r++) {
        shared[r] = exact(E, 0.04, same, share, 1);
        own[r] = exact(E, 0.04, others[r], share, 1);
    }
    g_autoptr(RfPooledUnit) together = unit_of(shared, 4, 1);
    g_autoptr(RfPooledUnit) apart = unit_of(own, 4, 4);
    g_assert_true(together->is_resolved && apart->is_resolved);
    const double common = together->unit_coulomb.sigma * together->unit_coulomb.sigma -
                          together->u_random_coulomb * together->u_random_coulomb;
    const double averaged = apart->unit_coulomb.sigma * apart->unit_coulomb.sigma -
                            apart->u_random_coulomb * apart->u_random_coulomb;
    g_assert_cmpfloat_with_epsilon(sqrt(common) / E, 0.004, 1e-5);
    g_assert_cmpfloat_with_epsilon(sqrt(averaged) / E, 0.002, 1e-5);
    g_assert_cmpfloat_with_epsilon(together->unit_coulomb.value / E, 1.0, 1e-5);
    g_assert_cmpfloat_with_epsilon(together->measurement_relative[0], 0.004, 1e-5);
    g_assert_cmpfloat_with_epsilon(apart->measurement_relative[2], 0.001, 1e-5);
    g_assert_cmpfloat_with_epsilon(together->parts[0].weight, 0.25, 1e-6);
    clear(shared, 4);
    clear(own, 4);
}

/* A recording that shares nothing counts for more than each of two that share a large error. */
static void weights_follow_what_is_shared(void)
{
    const size_t pair[] = {0}, lone[] = {1};
    const double share[] = {0.02};
    RfPooledRecording recordings[] = {exact(E, 0.02, pair, share, 1), exact(E, 0.02, pair, share, 1),
                                      exact(E, 0.02, lone, share, 1)};
    g_autoptr(RfPooledUnit) unit = unit_of(recordings, 3, 2);
    g_assert_cmpfloat_with_epsilon(unit->parts[0].weight, 0.25, 0.01);
    g_assert_cmpfloat_with_epsilon(unit->parts[2].weight, 0.5, 0.01);
    clear(recordings, 3);
}

static void one_that_is_off(void)
{
    const size_t same[] = {0};
    const double share[] = {0.01};
    RfPooledRecording recordings[5];
    for (int r = 0; r < 5; r++) recordings[r] = exact(r == 3 ? 1.03 * E : E, 0.03, same, share, 1);
    g_autoptr(RfPooledUnit) unit = unit_of(recordings, 5, 1);
    g_assert_cmpuint(unit->most_off, ==, 3);
    g_assert_cmpfloat(unit->most_off_p, <, 0.01);
    g_assert_cmpfloat(unit->p, <, 0.01);
    g_assert_cmpfloat_with_epsilon(unit->parts[3].offset.value, 0.03, 0.001);
    g_assert_cmpfloat_with_epsilon(unit->parts[3].without_coulomb.value / E, 1.0, 1e-4);
    g_assert_cmpfloat_with_epsilon(unit->parts[3].unit_coulomb.value / E, 1.03, 1e-4);
    clear(recordings, 5);
}

/* One charge on seven units or so can't tell its multiple by itself; a recording without charges can't tell a thing. */
static void open_integers(void)
{
    const size_t same[] = {0};
    const double share[] = {0.003}, few_share[] = {0.003 * 7.02 * E};
    const RfValue few_charge[] = {{7.02 * E, 0.1 * E}};
    RfPooledRecording recordings[] = {exact(E, 0.03, same, share, 1),
                                      exact(E, 0.03, same, share, 1),
                                      {1, few_charge, 1, same, few_share},
                                      {0, NULL, 1, same, NULL}};
    g_autoptr(RfPooledUnit) unit = unit_of(recordings, 4, 1);
    g_assert_cmpint(unit->parts[0].basis, ==, RF_POOLED_ALONE);
    g_assert_cmpint(unit->parts[2].basis, ==, RF_POOLED_TOGETHER);
    g_assert_cmpint(unit->parts[3].basis, ==, RF_POOLED_NONE);
    g_assert_cmpuint(unit->used, ==, 3);
    g_assert_cmpfloat_with_epsilon(unit->parts[2].unit_coulomb.value / E, 7.02 / 7.0, 1e-3);
    g_assert_cmpfloat_with_epsilon(unit->parts[2].u_random_coulomb / E, 0.1 / 7.0, 2e-3);
    clear(recordings, 2);
}

/* The prior is divided out again: what comes back doesn't hang on it. */
static void prior_is_divided_out(void)
{
    const RfValue charges[] = {{5.03 * E, 0.05 * E}, {-7.00 * E, 0.05 * E}};
    RfCombCharge prepared[2];
    rf_charge_comb_prepare(charges, 2, 0.0, prepared);
    RfValue narrow, wide;
    g_assert_true(rf_recording_unit_given(prepared, 2, E, (RfValue){0.0, 0.01}, &narrow));
    g_assert_true(rf_recording_unit_given(prepared, 2, E, (RfValue){0.005, 0.015}, &wide));
    g_assert_cmpfloat_with_epsilon(narrow.value, (5 * 0.03) / 74.0, 2e-4);
    g_assert_cmpfloat_with_epsilon(wide.value, narrow.value, 2e-4);
    g_assert_cmpfloat_with_epsilon(narrow.sigma, 0.05 / sqrt(74.0), 3e-4);
    g_assert_cmpfloat_with_epsilon(wide.sigma, narrow.sigma, 3e-4);
}

static void nothing_to_find(void)
{
    RfPooledRecording recordings[] = {{0}, {0}};
    g_autoptr(RfPooledUnit) unit = unit_of(recordings, 2, 0);
    g_assert_false(unit->is_resolved);
    g_assert_nonnull(strstr(unit->search->reason, "too few"));
}

/* 250 pools of six recordings; the benchmark has 1000 pools of more kinds. Bounds: 3 sigma of counting. Seed 3. */
static void coverage(void)
{
    enum { POOLS = 250 };
    const Benches benches = {6, 8, 9, 0.03, 0.10, 3, 2};
    gsl_rng *rng = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(rng, 3);
    int in_68 = 0, in_95 = 0, alarms = 0;
    for (int i = 0; i < POOLS; i++) {
        BenchPool *pool = bench_pool_new(&benches, 0.0, rng);
        g_autoptr(RfPooledUnit) unit = unit_of(pool->recordings, pool->n, pool->n_measurements);
        g_assert_true(unit->is_resolved);
        const double pull = (unit->unit_coulomb.value - E) / unit->unit_coulomb.sigma;
        in_68 += fabs(pull) < 1.0;
        in_95 += fabs(pull) < 1.959964;
        alarms += unit->most_off_p < 0.01;
        bench_pool_free(pool);
    }
    gsl_rng_free(rng);
    g_test_message("within u %d, within 1.96 u %d, alarms %d of %d", in_68, in_95, alarms, POOLS);
    g_assert_cmpfloat(fabs(in_68 / (double)POOLS - 0.6827), <, 3.0 * sqrt(0.6827 * 0.3173 / POOLS));
    g_assert_cmpfloat(fabs(in_95 / (double)POOLS - 0.95), <, 3.0 * sqrt(0.95 * 0.05 / POOLS));
    g_assert_cmpint(alarms, <=, 8);
}

/* A scale off by 3 % where 0.4 % is stated: found, and the right one. Seed 4. */
static void shifted_scale_is_found(void)
{
    enum { POOLS = 30 };
    const Benches benches = {8, 10, 9, 0.03, 0.10, 4, 1};
    gsl_rng *rng = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(rng, 4);
    int found = 0;
    for (int i = 0; i < POOLS; i++) {
        BenchPool *pool = bench_pool_new(&benches, 0.03, rng);
        g_autoptr(RfPooledUnit) unit = unit_of(pool->recordings, pool->n, pool->n_measurements);
        found += unit->most_off == 0 && unit->most_off_p < 0.01;
        bench_pool_free(pool);
    }
    gsl_rng_free(rng);
    g_assert_cmpint(found, >=, POOLS - 1);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/pooled_unit/shared-stays-own-averages", shared_stays_own_averages);
    g_test_add_func("/pooled_unit/weights-follow-what-is-shared", weights_follow_what_is_shared);
    g_test_add_func("/pooled_unit/one-that-is-off", one_that_is_off);
    g_test_add_func("/pooled_unit/open-integers", open_integers);
    g_test_add_func("/pooled_unit/prior-is-divided-out", prior_is_divided_out);
    g_test_add_func("/pooled_unit/nothing-to-find", nothing_to_find);
    g_test_add_func("/pooled_unit/coverage", coverage);
    g_test_add_func("/pooled_unit/shifted-scale-is-found", shifted_scale_is_found);
    return g_test_run();
}
