#include "physics/charge_unit.h"

#include <glib.h>
#include <gsl/gsl_errno.h>
#include <gsl/gsl_randist.h>
#include <gsl/gsl_rng.h>
#include <math.h>

#include "physics/charge_comb.h"

/* The truth of these made-up sets; deliberately not the elementary charge, which charge_unit must not know. */
static const double UNIT = 2.345e-19;

typedef struct {
    unsigned droplets;
    int smallest, largest;        /* |multiple| */
    double sigma_low, sigma_high; /* in units */
    unsigned wrong;               /* charges replaced by anything */
} Set;

static void draw_set(const Set *set, gsl_rng *rng, RfValue *charges)
{
    for (unsigned i = 0; i < set->droplets; i++) {
        const int range = set->largest - set->smallest + 1;
        int multiple = set->smallest + (int)gsl_rng_uniform_int(rng, (unsigned long)range);
        if (gsl_rng_uniform(rng) < 0.5) multiple = -multiple;
        const double sigma = UNIT * gsl_ran_flat(rng, set->sigma_low, set->sigma_high);
        charges[i] = (RfValue){multiple * UNIT + gsl_ran_gaussian(rng, sigma), sigma};
        if (i < set->wrong) charges[i].value = UNIT * gsl_ran_flat(rng, -set->largest, set->largest);
    }
}

typedef struct {
    unsigned sets, resolved, right;
    double pull_mean, pull_sd;
    double largest_chance;
} Tally;

/* Runs many sets; right: within 1 % of the truth. Pulls over the sets resolved rightly. */
static Tally run_sets(const Set *set, unsigned sets, unsigned long seed, unsigned trials)
{
    g_autofree RfValue *charges = g_new(RfValue, set->droplets);
    gsl_rng *rng = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(rng, seed);
    RfChargeUnitOptions options = RF_CHARGE_UNIT_DEFAULTS;
    options.trials = trials;
    options.relative_floor = 0.0;
    Tally tally = {.sets = sets};
    double sum = 0.0, square = 0.0;
    for (unsigned i = 0; i < sets; i++) {
        draw_set(set, rng, charges);
        g_autoptr(RfChargeUnit) unit = rf_charge_unit_find(charges, set->droplets, &options);
        g_assert_nonnull(unit->reason);
        if (!unit->is_resolved) continue;
        tally.resolved++;
        if (fabs(unit->unit_coulomb.value / UNIT - 1.0) > 0.05) continue;
        tally.right++;
        const double pull = (unit->unit_coulomb.value - UNIT) / unit->u_random_coulomb;
        sum += pull;
        square += pull * pull;
        tally.largest_chance = fmax(tally.largest_chance, unit->chance);
    }
    gsl_rng_free(rng);
    if (tally.right > 0) {
        tally.pull_mean = sum / tally.right;
        tally.pull_sd = sqrt(square / tally.right - tally.pull_mean * tally.pull_mean);
    }
    return tally;
}

static void tell(const char *what, const Tally *tally)
{
    g_test_message("%s: %u sets, resolved %u, right %u, pull %.2f +/- %.2f", what, tally->sets,
                   tally->resolved, tally->right, tally->pull_mean, tally->pull_sd);
}

/* Sigma far wider than the unit hides the comb: the ratio is 1; sigma far narrower: unit/(sigma sqrt(2 pi)). */
static void comb_limits(void)
{
    const RfCombCharge blurred = {3.3 * UNIT, 2.0 * UNIT, 0.0};
    g_assert_cmpfloat_with_epsilon(rf_charge_comb_ratio(&blurred, UNIT), 1.0, 1e-9);
    const RfCombCharge sharp = {3.0 * UNIT, 0.01 * UNIT, 0.0};
    const double peak = 0.02 + 0.98 / (0.01 * sqrt(2.0 * G_PI));
    g_assert_cmpfloat_with_epsilon(rf_charge_comb_ratio(&sharp, UNIT), peak, 1e-9);
    const RfCombCharge off = {3.5 * UNIT, 0.01 * UNIT, 0.0};
    g_assert_cmpfloat_with_epsilon(rf_charge_comb_ratio(&off, UNIT), 0.02, 1e-9);
    const RfCombCharge neutral = {0.0, 0.01 * UNIT, 1.0};
    g_assert_cmpfloat_with_epsilon(rf_charge_comb_ratio(&neutral, UNIT), 1.0, 1e-9);
}

/* The two ways of summing the comb agree with the plain sum on both sides of where they meet. */
static void comb_is_the_plain_sum(void)
{
    for (double t = 0.05; t < 0.9; t += 0.0375) {
        for (double x = 3.0; x < 4.0; x += 0.09) {
            double sum = 0.0;
            for (int n = -20; n <= 20; n++)
                if (n != 0) sum += exp(-0.5 * (x - n) * (x - n) / (t * t)) / (t * sqrt(2.0 * G_PI));
            const RfCombCharge charge = {x * UNIT, t * UNIT, 0.0};
            g_assert_cmpfloat_with_epsilon(rf_charge_comb_ratio(&charge, UNIT), 0.02 + 0.98 * sum, 3e-5);
        }
    }
}

/* For charges spread evenly the ratio is 1 on average, whatever the unit: it is a likelihood ratio. */
static void comb_averages_to_one(void)
{
    for (double t = 0.05; t < 0.5; t += 0.05) {
        double sum = 0.0;
        const int steps = 2000;
        for (int i = 0; i < steps; i++) {
            const RfCombCharge charge = {(20.0 + (i + 0.5) / steps) * UNIT, t * UNIT, 0.0};
            sum += rf_charge_comb_ratio(&charge, UNIT) / steps;
        }
        g_assert_cmpfloat_with_epsilon(sum, 1.0, 1e-4);
    }
}

static void easy_sets_are_resolved(void)
{
    const Set set = {15, 1, 5, 0.05, 0.15, 0};
    const Tally tally = run_sets(&set, 100, 11, 0);
    tell("15 droplets, |n| 1..5, sigma 0.05..0.15", &tally);
    g_assert_cmpuint(tally.right, ==, tally.resolved);
    g_assert_cmpuint(tally.resolved, >=, 95);
}

static void sigma_has_unit_pull(void)
{
    const Set set = {25, 1, 8, 0.04, 0.16, 0};
    const Tally tally = run_sets(&set, 400, 12, 0);
    tell("25 droplets, |n| 1..8, sigma 0.04..0.16", &tally);
    g_assert_cmpuint(tally.right, ==, tally.resolved);
    /* standard deviation of a standard deviation of 400: 0.035 */
    g_assert_cmpfloat(tally.pull_sd, <, 1.11);
    g_assert_cmpfloat(tally.pull_sd, >, 0.89);
    g_assert_cmpfloat(fabs(tally.pull_mean), <, 0.17);
}

static void wrong_charges_do_not_rule(void)
{
    const Set set = {20, 1, 5, 0.05, 0.12, 2};
    const Tally tally = run_sets(&set, 100, 13, 0);
    tell("20 droplets of which 2 wrong", &tally);
    g_assert_cmpuint(tally.right, ==, tally.resolved);
    g_assert_cmpuint(tally.resolved, >=, 90);
}

static void highly_charged_are_never_resolved(void)
{
    static const Set sets[] = {{20, 30, 80, 0.30, 0.30, 0},
                               {20, 30, 80, 0.25, 0.50, 0},
                               {40, 50, 200, 0.4, 0.8, 0},
                               {12, 20, 60, 0.2, 0.3, 0}};
    for (size_t i = 0; i < G_N_ELEMENTS(sets); i++) {
        const Tally tally = run_sets(&sets[i], 40, 20 + i, 0);
        tell("highly charged", &tally);
        g_assert_cmpuint(tally.resolved, ==, 0);
    }
}

static void uncertain_are_never_resolved(void)
{
    const Set set = {20, 1, 6, 0.45, 0.7, 0};
    const Tally tally = run_sets(&set, 100, 31, 0);
    tell("20 droplets, |n| 1..6, sigma 0.45..0.7", &tally);
    g_assert_cmpuint(tally.resolved, ==, 0);
}

static void few_are_never_resolved(void)
{
    const Set set = {3, 1, 5, 0.05, 0.1, 0};
    const Tally tally = run_sets(&set, 200, 32, 0);
    tell("3 droplets", &tally);
    g_assert_cmpuint(tally.resolved, ==, 0);
    const RfChargeUnitOptions options = RF_CHARGE_UNIT_DEFAULTS;
    g_autoptr(RfChargeUnit) none = rf_charge_unit_find(NULL, 0, &options);
    g_assert_false(none->is_resolved);
    g_assert_true(g_str_has_prefix(none->reason, "too few: 0 charged droplets"));
}

/* Charges from a smooth distribution: no unit, and none found. */
static void smooth_charges_have_no_unit(void)
{
    gsl_rng *rng = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(rng, 33);
    RfChargeUnitOptions options = RF_CHARGE_UNIT_DEFAULTS;
    options.trials = 0;
    unsigned resolved = 0;
    for (int set = 0; set < 300; set++) {
        RfValue charges[15];
        for (int i = 0; i < 15; i++)
            charges[i] = (RfValue){UNIT * (gsl_rng_uniform(rng) < 0.5 ? -1 : 1) * gsl_ran_flat(rng, 0.7, 6.0),
                                   0.08 * UNIT};
        g_autoptr(RfChargeUnit) unit = rf_charge_unit_find(charges, 15, &options);
        if (unit->is_resolved) resolved++;
    }
    gsl_rng_free(rng);
    g_test_message("smooth charges: %u of 300 sets resolved", resolved);
    g_assert_cmpuint(resolved, ==, 0);
}

/* All on one multiple: one charge, whatever it is made of. On two multiples: no better. */
static void equal_charges_do_not_tell_the_unit(void)
{
    for (int levels = 1; levels <= 2; levels++) {
        RfValue charges[40];
        for (int i = 0; i < 40; i++)
            charges[i] = (RfValue){UNIT * (2.0 + i % levels) * (1.0 + 0.01 * sin(i)), 0.05 * UNIT};
        g_autoptr(RfChargeUnit) unit = rf_charge_unit_find(charges, 40, &RF_CHARGE_UNIT_DEFAULTS);
        g_test_message("%s", unit->reason);
        g_assert_false(unit->is_resolved);
    }
}

/* All multiples even by chance: a handful says its doubt in divisor_chance. */
static void shared_divisor_is_stated(void)
{
    RfValue few[6], many[24];
    for (int i = 0; i < 24; i++) {
        many[i] = (RfValue){UNIT * (1 + i % 5), 0.05 * UNIT};
        if (i < 6) few[i] = many[i];
    }
    g_autoptr(RfChargeUnit) doubtful = rf_charge_unit_find(few, 6, &RF_CHARGE_UNIT_DEFAULTS);
    g_autoptr(RfChargeUnit) sure = rf_charge_unit_find(many, 24, &RF_CHARGE_UNIT_DEFAULTS);
    g_test_message("shared divisor: 6 droplets %.3f, 24 droplets %.5f", doubtful->divisor_chance,
                   sure->divisor_chance);
    g_assert_cmpfloat(doubtful->divisor_chance, >, 0.03);
    g_assert_cmpfloat(sure->divisor_chance, <, 0.003);
    g_assert_true(sure->is_resolved);
}

/* Every unit of the family e/m explains; the largest is reported. Neutral droplets change nothing. */
static void neutrals_do_not_count(void)
{
    RfValue charges[30];
    for (int i = 0; i < 20; i++) charges[i] = (RfValue){UNIT * (1 + i % 4) * (i % 2 ? 1 : -1), 0.1 * UNIT};
    for (int i = 20; i < 30; i++) charges[i] = (RfValue){0.02 * UNIT * (i - 25), 0.1 * UNIT};
    g_autoptr(RfChargeUnit) without = rf_charge_unit_find(charges, 20, &RF_CHARGE_UNIT_DEFAULTS);
    g_autoptr(RfChargeUnit) with = rf_charge_unit_find(charges, 30, &RF_CHARGE_UNIT_DEFAULTS);
    g_assert_cmpuint(with->charged, ==, 20);
    g_assert_true(without->is_resolved);
    g_assert_true(with->is_resolved);
    g_assert_cmpfloat_with_epsilon(with->unit_coulomb.value / without->unit_coulomb.value, 1.0, 1e-3);
    g_assert_cmpfloat_with_epsilon(with->u_random_coulomb / without->u_random_coulomb, 1.0, 0.02);
}

static void scales_with_the_charges(void)
{
    RfValue charges[18], doubled[18];
    for (int i = 0; i < 18; i++) {
        charges[i] = (RfValue){UNIT * (1 + i % 5) * (1.0 + 0.01 * cos(i)), 0.1 * UNIT};
        doubled[i] = (RfValue){2.0 * charges[i].value, 2.0 * charges[i].sigma};
    }
    g_autoptr(RfChargeUnit) once = rf_charge_unit_find(charges, 18, &RF_CHARGE_UNIT_DEFAULTS);
    g_autoptr(RfChargeUnit) twice = rf_charge_unit_find(doubled, 18, &RF_CHARGE_UNIT_DEFAULTS);
    g_assert_cmpfloat_with_epsilon(twice->unit_coulomb.value / once->unit_coulomb.value, 2.0, 1e-3);
    g_assert_cmpfloat_with_epsilon(twice->u_random_coulomb / once->u_random_coulomb, 2.0, 1e-2);
}

static void common_part_does_not_average_out(void)
{
    RfValue charges[18];
    for (int i = 0; i < 18; i++) charges[i] = (RfValue){UNIT * (1 + i % 5), 0.1 * UNIT};
    RfChargeUnitOptions options = RF_CHARGE_UNIT_DEFAULTS;
    options.relative_common = 0.01;
    options.wants_curve = true;
    g_autoptr(RfChargeUnit) unit = rf_charge_unit_find(charges, 18, &options);
    const double expected = hypot(unit->u_random_coulomb, 0.01 * unit->unit_coulomb.value);
    g_assert_cmpfloat_with_epsilon(unit->unit_coulomb.sigma / expected, 1.0, 1e-12);
    g_assert_cmpuint(unit->curve_unit_coulomb->len, ==, unit->curve_log_likelihood->len);
    g_assert_cmpuint(unit->curve_unit_coulomb->len, >, 100);
}

/* The chance of a set with a unit is the least that the trials can show; of a smooth set, anything. */
static void chance_tells_combs_from_smooth(void)
{
    RfValue comb[12], smooth[12];
    for (int i = 0; i < 12; i++) {
        comb[i] = (RfValue){UNIT * (1 + i % 5) + 0.06 * UNIT * sin(5.0 * i), 0.08 * UNIT};
        smooth[i] = (RfValue){UNIT * (1.0 + 0.37 * i), 0.08 * UNIT};
    }
    RfChargeUnitOptions options = RF_CHARGE_UNIT_DEFAULTS;
    options.trials = 199;
    g_autoptr(RfChargeUnit) with = rf_charge_unit_find(comb, 12, &options);
    g_autoptr(RfChargeUnit) without = rf_charge_unit_find(smooth, 12, &options);
    g_test_message("chance: comb %.3f, smooth %.3f", with->chance, without->chance);
    g_assert_cmpfloat_with_epsilon(with->chance, 1.0 / 200.0, 1e-9);
    g_assert_true(with->is_resolved);
    g_assert_cmpfloat(without->chance, >, 0.02);
    g_assert_false(without->is_resolved);
}

static void same_input_same_answer(void)
{
    RfValue charges[15];
    for (int i = 0; i < 15; i++)
        charges[i] = (RfValue){UNIT * (1 + i % 5) + 1e-20 * sin(3.0 * i), 0.1 * UNIT};
    g_autoptr(RfChargeUnit) once = rf_charge_unit_find(charges, 15, &RF_CHARGE_UNIT_DEFAULTS);
    g_autoptr(RfChargeUnit) again = rf_charge_unit_find(charges, 15, &RF_CHARGE_UNIT_DEFAULTS);
    g_assert_cmpfloat(once->unit_coulomb.value, ==, again->unit_coulomb.value);
    g_assert_cmpfloat(once->chance, ==, again->chance);
    g_assert_cmpstr(once->reason, ==, again->reason);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/charge_comb/ratio/limits", comb_limits);
    g_test_add_func("/charge_comb/ratio/is-the-plain-sum", comb_is_the_plain_sum);
    g_test_add_func("/charge_comb/ratio/averages-to-one", comb_averages_to_one);
    g_test_add_func("/charge_unit/find/easy-sets-are-resolved", easy_sets_are_resolved);
    g_test_add_func("/charge_unit/find/sigma-has-unit-pull", sigma_has_unit_pull);
    g_test_add_func("/charge_unit/find/wrong-charges-do-not-rule", wrong_charges_do_not_rule);
    g_test_add_func("/charge_unit/find/shared-divisor-is-stated", shared_divisor_is_stated);
    g_test_add_func("/charge_unit/find/neutrals-do-not-count", neutrals_do_not_count);
    g_test_add_func("/charge_unit/find/scales-with-the-charges", scales_with_the_charges);
    g_test_add_func("/charge_unit/find/common-part-does-not-average-out", common_part_does_not_average_out);
    g_test_add_func("/charge_unit/find/chance-tells-combs-from-smooth", chance_tells_combs_from_smooth);
    g_test_add_func("/charge_unit/find/same-input-same-answer", same_input_same_answer);
    g_test_add_func("/charge_unit/find/equal-charges-do-not-tell-the-unit",
                    equal_charges_do_not_tell_the_unit);
    g_test_add_func("/charge_unit/find/highly-charged-are-never-resolved", highly_charged_are_never_resolved);
    g_test_add_func("/charge_unit/find/uncertain-are-never-resolved", uncertain_are_never_resolved);
    g_test_add_func("/charge_unit/find/few-are-never-resolved", few_are_never_resolved);
    g_test_add_func("/charge_unit/find/smooth-charges-have-no-unit", smooth_charges_have_no_unit);
    return g_test_run();
}
