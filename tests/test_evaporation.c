#include "physics/evaporation.h"

#include <gsl/gsl_errno.h>
#include <gsl/gsl_randist.h>
#include <math.h>

#include "physics/constants.h"
#include "physics/drag.h"
#include "physics/two_radii.h"
#include "tests/support/droplet_walk.h"

enum { DROPLETS = 6, SAMPLES = 1200 };
static const double FRAME_S = 1.0 / 30, VOLTAGE_V = 400;

/* On for every other 5 s. */
static double voltage_at(double time_s)
{
    return fmod(time_s, 10) >= 5 ? VOLTAGE_V : 0;
}

/* A droplet whose radius squared falls by k every second, step by step. */
static RfTrail shrinking_trail(unsigned number, double radius_m, double k_m2_s, double charge,
                               gsl_rng *random)
{
    RfSample *samples = g_new(RfSample, SAMPLES);
    double fall_m = 0, across_m = 0;
    for (int i = 0; i < SAMPLES; i++) {
        double t = i * FRAME_S, a = sqrt(radius_m * radius_m - k_m2_s * t);
        double drag = rf_drag_coefficient_kg_s(&WALK_MEDIUM, a);
        double step = sqrt(2 * rf_drag_diffusion_m2_s(&WALK_MEDIUM, a) * FRAME_S);
        samples[i] = (RfSample){t, fall_m + gsl_ran_gaussian(random, 1e-7),
                                across_m + gsl_ran_gaussian(random, 1e-7), 1e-7, 1e-7};
        double speed = rf_drag_settling_speed_m_s(&WALK_MEDIUM, a) +
                       charge * voltage_at(t + 0.5 * FRAME_S) / (drag * WALK_MEDIUM.plate_gap_m);
        fall_m += speed * FRAME_S + gsl_ran_gaussian(random, step);
        across_m += gsl_ran_gaussian(random, step);
    }
    return (RfTrail){number, SAMPLES, samples};
}

static RfDropletSet *measure(double k_m2_s, RfTrail *trails, unsigned long seed)
{
    static const RfFieldSheet sheet = {
        .states = 2, .state = {RF_FIELD_OFF, RF_FIELD_TOP_PLUS}, .top_plus_v = VOLTAGE_V};
    const RfDropletSetSettings settings = {.medium = &WALK_MEDIUM, .sheet = &sheet};
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, seed);
    for (unsigned i = 0; i < DROPLETS; i++)
        trails[i] = shrinking_trail(i + 1, (0.6 + 0.05 * i) * 1e-6, k_m2_s,
                                    ((int)i - 3) * RF_ELEMENTARY_CHARGE_COULOMB, random);
    gsl_rng_free(random);
    RfDropletSet *set = rf_droplet_set_measure(trails, DROPLETS, &settings, NULL);
    g_assert_nonnull(set);
    return set;
}

static void clear(RfTrail *trails)
{
    for (int i = 0; i < DROPLETS; i++) walk_trail_clear(&trails[i]);
}

/* 0.36 um^2 to 0.28 um^2 in 40 s, for the smallest. */
static void test_found_where_it_is(void)
{
    RfTrail trails[DROPLETS];
    g_autoptr(RfDropletSet) set = measure(2e-15, trails, 1);
    RfEvaporation found = rf_evaporation_pool(trails, set, &WALK_MEDIUM);
    g_test_message("K = %.3g(%.2g) m^2/s from %u droplets, p = %.2g", found.k_m2_s.value, found.k_m2_s.sigma,
                   found.droplets, found.p);
    g_assert_cmpfloat(found.p, <, 1e-3);
    /* first order in a change of a fifth of the radius squared: a tenth of it besides its sigma */
    g_assert_cmpfloat_with_epsilon(found.k_m2_s.value, 2e-15, 2e-16 + 3 * found.k_m2_s.sigma);
    clear(trails);
}

/* Twelve recordings without any: pulls spread like 1 (standard error 0.2), none significant. */
static void test_none_where_none_is(void)
{
    double squares = 0;
    for (unsigned long seed = 1; seed <= 12; seed++) {
        RfTrail trails[DROPLETS];
        g_autoptr(RfDropletSet) set = measure(0, trails, 100 + seed);
        RfEvaporation found = rf_evaporation_pool(trails, set, &WALK_MEDIUM);
        g_assert_cmpfloat(found.p, >, 1e-3);
        squares += pow(found.k_m2_s.value / found.k_m2_s.sigma, 2);
        clear(trails);
    }
    g_test_message("pull %.2f", sqrt(squares / 12));
    g_assert_cmpfloat_with_epsilon(sqrt(squares / 12), 1, 0.6);
}

/* Droplet 4 has no charge, as dust would have none; droplet 6 has two. */
static void test_causes_are_weighed(void)
{
    RfTrail trails[DROPLETS];
    g_autoptr(RfDropletSet) set = measure(0, trails, 1);
    for (size_t droplet = 3; droplet <= 5; droplet += 2) {
        RfCauseEvidence causes[RF_CAUSES];
        rf_two_radii_examine(trails, set, &WALK_MEDIUM, droplet, causes);
        g_assert_cmpint(causes[RF_CAUSE_DUST].is_supported, ==, droplet == 3);
        g_assert_false(causes[RF_CAUSE_COMMON_MOTION].is_supported);
        g_assert_false(causes[RF_CAUSE_EVAPORATION].is_supported);
        for (int c = 0; c < RF_CAUSES; c++) {
            g_test_message("%s: %s", rf_cause_to_string((RfCause)c), causes[c].evidence);
            g_free(causes[c].evidence);
        }
    }
    clear(trails);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/evaporation/pool/found-where-it-is", test_found_where_it_is);
    g_test_add_func("/evaporation/pool/none-where-none-is", test_none_where_none_is);
    g_test_add_func("/two-radii/examine/causes-are-weighed", test_causes_are_weighed);
    return g_test_run();
}
