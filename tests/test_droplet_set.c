#include "physics/droplet_set.h"

#include <gsl/gsl_errno.h>
#include <math.h>
#include <string.h>

#include "physics/constants.h"
#include "tests/support/droplet_walk.h"

enum { DROPLETS = 7 };
static const double E = RF_ELEMENTARY_CHARGE_COULOMB;
static const double SWITCHES_S[] = {4.217, 9.903, 14.318, 20.051, 24.777};
static const RfFieldSheet SHEET = {
    .states = 2, .state = {RF_FIELD_OFF, RF_FIELD_TOP_PLUS}, .top_plus_v = 350};

/* Droplets of -3 to 3 units; the fifth changes from 1 to -2 at 17 s. */
static void record(RfTrail *trails)
{
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    g_autoptr(RfFieldTimeline) truth =
        walk_timeline_new(SWITCHES_S, G_N_ELEMENTS(SWITCHES_S), RF_FIELD_TOP_PLUS, 350, 30);
    for (unsigned i = 0; i < DROPLETS; i++) {
        Walk walk = {.medium = &WALK_MEDIUM,
                     .timeline = truth,
                     .radius_m = (0.45 + 0.05 * i) * 1e-6,
                     .charge_coulomb = E * ((int)i - 3),
                     .end_s = 30,
                     .frame_s = 1.0 / 30,
                     .exposure = 0.5,
                     .noise_m = 0.1e-6,
                     .step_s = i == 4 ? 17 : 0,
                     .charge_after_coulomb = -2 * E};
        trails[i] = walk_trail_new(&walk, i + 1, random);
    }
    gsl_rng_free(random);
}

static void clear(RfTrail *trails)
{
    for (int i = 0; i < DROPLETS; i++) walk_trail_clear(&trails[i]);
}

static void assert_charge(const RfSpellFit *spell, double units)
{
    RfValue q = spell->charge_coulomb;
    g_assert_true(spell->has_charge);
    g_assert_cmpfloat(fabs(q.value - units * E), <, 4 * q.sigma);
    g_assert_cmpfloat(q.sigma, <, 0.2 * E);
}

static void test_whole_recording(void)
{
    RfTrail trails[DROPLETS];
    record(trails);
    RfDropletSetSettings settings = {.medium = &WALK_MEDIUM, .sheet = &SHEET};
    g_autoptr(GError) error = NULL;
    g_autoptr(RfDropletSet) set = rf_droplet_set_measure(trails, DROPLETS, &settings, &error);
    g_assert_no_error(error);
    g_assert_cmpuint(set->timeline->switches->len, ==, G_N_ELEMENTS(SWITCHES_S));
    for (unsigned k = 0; k < G_N_ELEMENTS(SWITCHES_S); k++) {
        RfValue t = g_array_index(set->timeline->switches, RfFieldSwitch, k).time_s;
        g_assert_cmpfloat(fabs(t.value - SWITCHES_S[k]), <, 4 * t.sigma);
        g_assert_cmpfloat(t.sigma, <, 0.02);
    }
    for (int i = 0; i < DROPLETS; i++) {
        const RfDropletResult *d = &set->droplets[i];
        g_assert_cmpint(d->fit.state, ==, RF_FIT_DONE);
        g_assert_cmpuint(d->steps->len, ==, i == 4 ? 1 : 0);
        g_assert_cmpuint(d->fit.spells, ==, i == 4 ? 2 : 1);
        assert_charge(&d->fit.spell[0], i - 3);
        if (i == 4) assert_charge(&d->fit.spell[1], -2);
    }
    clear(trails);
}

static void last_one_first(void *user, size_t n, void (*work)(void *context, size_t i), void *context)
{
    (void)user;
    while (n-- > 0) work(context, n);
}

/* The order in which droplets are worked on, as threads would change it, must not change a bit. */
static void test_order_does_not_matter(void)
{
    RfTrail trails[DROPLETS];
    record(trails);
    RfDropletSetSettings settings = {.medium = &WALK_MEDIUM, .sheet = &SHEET};
    g_autoptr(RfDropletSet) forth = rf_droplet_set_measure(trails, DROPLETS, &settings, NULL);
    settings.side_by_side.for_each = last_one_first;
    g_autoptr(RfDropletSet) back = rf_droplet_set_measure(trails, DROPLETS, &settings, NULL);
    for (int i = 0; i < DROPLETS; i++) {
        const RfDropletFit *a = &forth->droplets[i].fit, *b = &back->droplets[i].fit;
        g_assert_true(a->radius_m.value == b->radius_m.value && a->radius_m.sigma == b->radius_m.sigma);
        g_assert_true(a->spell[0].charge_coulomb.value == b->spell[0].charge_coulomb.value);
        g_assert_true(a->log_likelihood == b->log_likelihood);
    }
    clear(trails);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/droplet-set/measure/whole-recording", test_whole_recording);
    g_test_add_func("/droplet-set/measure/order-does-not-matter", test_order_does_not_matter);
    return g_test_run();
}
