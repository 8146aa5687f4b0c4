#include "physics/evaporation.h"

#include <gsl/gsl_errno.h>
#include <gsl/gsl_randist.h>
#include <math.h>

#include "physics/constants.h"
#include "physics/drag.h"
#include "physics/two_radii.h"
#include "tests/support/droplet_walk.h"

enum { DROPLETS = 8, SAMPLES = 1200 };
static const double FRAME_S = 1.0 / 30, VOLTAGE_V = 400;

typedef double (*Schedule)(double time_s);

/* On for every other 5 s. */
static double by_turns(double time_s)
{
    return fmod(time_s, 10) >= 5 ? VOLTAGE_V : 0;
}

/* Off is seen early, on late: a constant radius would be that of the first third of the time. */
static double late(double time_s)
{
    return (time_s >= 16 && time_s < 24) || time_s >= 28 ? VOLTAGE_V : 0;
}

/* A droplet whose radius squared falls by k every second, step by step. */
static RfTrail shrinking_trail(unsigned number, double radius_m, double k_m2_s, double charge,
                               Schedule voltage_at, gsl_rng *random)
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

static double charge_of(unsigned i)
{
    return ((int)i - 3) * RF_ELEMENTARY_CHARGE_COULOMB;
}

/* At the start. */
static double radius_of_m(unsigned i)
{
    return (0.6 + 0.05 * i) * 1e-6;
}

static RfDropletSet *measure(double k_m2_s, Schedule schedule, RfTrail *trails, unsigned long seed)
{
    static const RfFieldSheet sheet = {
        .states = 2, .state = {RF_FIELD_OFF, RF_FIELD_TOP_PLUS}, .top_plus_v = VOLTAGE_V};
    const RfDropletSetSettings settings = {.medium = &WALK_MEDIUM, .sheet = &sheet};
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, seed);
    for (unsigned i = 0; i < DROPLETS; i++)
        trails[i] = shrinking_trail(i + 1, radius_of_m(i), k_m2_s, charge_of(i), schedule, random);
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
    g_autoptr(RfDropletSet) set = measure(2e-15, by_turns, trails, 1);
    const RfEvaporation found = set->evaporation;
    g_test_message("K = %.3g(%.2g) m^2/s from %u droplets, p = %.2g", found.k_m2_s.value, found.k_m2_s.sigma,
                   found.droplets, found.p);
    g_assert_true(rf_evaporation_is_plain(&found));
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
        g_autoptr(RfDropletSet) set = measure(0, by_turns, trails, 100 + seed);
        const RfEvaporation found = set->evaporation;
        g_assert_cmpfloat(found.p, >, 1e-3);
        squares += pow(found.k_m2_s.value / found.k_m2_s.sigma, 2);
        clear(trails);
    }
    g_test_message("pull %.2f", sqrt(squares / 12));
    g_assert_cmpfloat_with_epsilon(sqrt(squares / 12), 1, 0.6);
}

typedef struct {
    double sum, squares;
    unsigned n;
} Pulls;

static void add_pull(Pulls *pulls, double error, double sigma)
{
    pulls->sum += error / sigma;
    pulls->squares += error * error / (sigma * sigma);
    pulls->n++;
}

static void add_fit(Pulls *radius, Pulls *charge, const RfDropletFit *fit, unsigned i, double k_m2_s)
{
    double middle_s = 0.5 * (SAMPLES - 1) * FRAME_S;
    double truth_m = sqrt(radius_of_m(i) * radius_of_m(i) - k_m2_s * middle_s);
    g_assert_cmpint(fit->state, ==, RF_FIT_DONE);
    add_pull(radius, fit->radius_m.value - truth_m, hypot(fit->radius_m.sigma, fit->evaporation_radius_m));
    for (size_t s = 0; s < fit->spells; s++)
        if (fit->spell[s].has_charge)
            add_pull(charge, fit->spell[s].charge_coulomb.value - charge_of(i),
                     hypot(fit->spell[s].charge_coulomb.sigma, fit->spell[s].evaporation_coulomb));
}

static double mean(const char *what, const Pulls *pulls)
{
    g_test_message("%s: %u pulls, mean %.2f, rms %.2f", what, pulls->n, pulls->sum / pulls->n,
                   sqrt(pulls->squares / pulls->n));
    return pulls->sum / pulls->n;
}

static double rms(const Pulls *pulls)
{
    return sqrt(pulls->squares / pulls->n);
}

/* Sixteen recordings of eight droplets that lose a quarter to a third of their radius squared. Errors over sigma spread like
 * 1 (standard error 0.06, more as all droplets of a recording share K); without it they don't. */
static void test_charges_are_put_right(void)
{
    const double k_m2_s = 3e-15;
    Pulls radius = {0}, charge = {0}, radius_as_seen = {0}, charge_as_seen = {0};
    for (unsigned long seed = 1; seed <= 16; seed++) {
        RfTrail trails[DROPLETS];
        g_autoptr(RfDropletSet) set = measure(k_m2_s, late, trails, 200 + seed);
        g_test_message("K = %.3g(%.2g), p %.2g, air %.2g, alike %.2g", set->evaporation.k_m2_s.value,
                       set->evaporation.k_m2_s.sigma, set->evaporation.p, set->evaporation.air_log_odds,
                       set->evaporation.alike_p);
        const RfDropletModel model = {.medium = &WALK_MEDIUM, .timeline = set->timeline};
        for (unsigned i = 0; i < DROPLETS; i++) {
            RfDropletFit as_seen;
            rf_droplet_fit(&trails[i], &model, &as_seen);
            add_fit(&radius_as_seen, &charge_as_seen, &as_seen, i, k_m2_s);
            add_fit(&radius, &charge, &set->droplets[i].fit, i, k_m2_s);
        }
        clear(trails);
    }
    g_assert_cmpfloat_with_epsilon(mean("radius", &radius), 0, 0.35);
    g_assert_cmpfloat_with_epsilon(mean("charge", &charge), 0, 0.35);
    g_assert_cmpfloat_with_epsilon(rms(&radius), 1, 0.25);
    g_assert_cmpfloat_with_epsilon(rms(&charge), 1, 0.25);
    mean("radius as seen", &radius_as_seen);
    mean("charge as seen", &charge_as_seen);
    g_assert_cmpfloat(rms(&radius_as_seen), >, 2);
    g_assert_cmpfloat(rms(&charge_as_seen), >, 2);
}

/* Droplet 4 has no charge, as dust would have none; droplet 6 has two. */
static void test_causes_are_weighed(void)
{
    RfTrail trails[DROPLETS];
    g_autoptr(RfDropletSet) set = measure(0, by_turns, trails, 1);
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
    g_test_add_func("/evaporation/undo/charges-are-put-right", test_charges_are_put_right);
    g_test_add_func("/two-radii/examine/causes-are-weighed", test_causes_are_weighed);
    return g_test_run();
}
