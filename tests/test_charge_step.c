#include "physics/charge_step.h"

#include <gsl/gsl_errno.h>
#include <math.h>

#include "physics/constants.h"
#include "tests/support/droplet_walk.h"

static const double E = RF_ELEMENTARY_CHARGE_COULOMB;
static const double SWITCHES_S[] = {4, 10, 14, 20, 24, 30, 34};

static Walk usual_walk(const RfFieldTimeline *timeline)
{
    return (Walk){.medium = &WALK_MEDIUM,
                  .timeline = timeline,
                  .radius_m = 0.55e-6,
                  .charge_coulomb = -3 * E,
                  .end_s = 38,
                  .frame_s = 1.0 / 25,
                  .exposure = 0.5,
                  .noise_m = 0.15e-6};
}

static GArray *steps_of(const Walk *walk, const RfFieldTimeline *timeline, gsl_rng *random)
{
    RfTrail trail = walk_trail_new(walk, 1, random);
    RfDropletModel model = {.medium = &WALK_MEDIUM, .timeline = timeline};
    RfDropletFit fit;
    rf_droplet_fit(&trail, &model, &fit);
    GArray *steps = rf_charge_step_find(&trail, &model, &fit);
    walk_trail_clear(&trail);
    return steps;
}

static RfFieldTimeline *usual_timeline(void)
{
    return walk_timeline_new(SWITCHES_S, G_N_ELEMENTS(SWITCHES_S), RF_FIELD_TOP_PLUS, 300, 38);
}

/* 300 droplets, a chance below 1e-3 each: none is expected, two would have a probability of 4 %. */
static void test_none_invented(void)
{
    g_autoptr(RfFieldTimeline) timeline = usual_timeline();
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    unsigned invented = 0;
    for (int i = 0; i < 300; i++) {
        Walk walk = usual_walk(timeline);
        walk.radius_m = (0.3 + 0.002 * i) * 1e-6;
        walk.charge_coulomb = E * (i % 11 - 5);
        g_autoptr(GArray) steps = steps_of(&walk, timeline, random);
        invented += steps->len;
    }
    g_test_message("%u steps invented in 300 droplets", invented);
    g_assert_cmpuint(invented, <=, 1);
    gsl_rng_free(random);
}

/* Steps of one to three units at any time under the field; those whose size is at least 5 sigma count. */
static void test_recall_and_time(void)
{
    g_autoptr(RfFieldTimeline) timeline = usual_timeline();
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    unsigned plain = 0, found = 0, extra = 0;
    double pulls = 0, size_pulls = 0;
    for (int i = 0; i < 120; i++) {
        Walk walk = usual_walk(timeline);
        double into_s = 1 + 4 * gsl_rng_uniform(random);
        walk.step_s = SWITCHES_S[2 * (i % 3)] + into_s;
        walk.charge_after_coulomb = walk.charge_coulomb + E * (1 + i % 3) * (i % 2 ? 1 : -1);
        g_autoptr(GArray) steps = steps_of(&walk, timeline, random);
        plain++;
        extra += steps->len > 1 ? steps->len - 1 : 0;
        for (unsigned k = 0; k < steps->len; k++) {
            const RfChargeStep *s = &g_array_index(steps, RfChargeStep, k);
            if (fabs(s->time_s.value - walk.step_s) > 1) continue;
            double truth = walk.charge_after_coulomb - walk.charge_coulomb;
            found++;
            pulls += pow((s->time_s.value - walk.step_s) / s->time_s.sigma, 2);
            size_pulls += pow((s->change_coulomb.value - truth) / s->change_coulomb.sigma, 2);
        }
    }
    g_test_message("%u of %u found, %u extra; pull of time %.2f, of size %.2f", found, plain, extra,
                   sqrt(pulls / found), sqrt(size_pulls / found));
    g_assert_cmpuint(found * 100, >=, plain * 95);
    g_assert_cmpuint(extra, <=, 1);
    g_assert_cmpfloat_with_epsilon(sqrt(pulls / found), 1, 0.25);
    g_assert_cmpfloat_with_epsilon(sqrt(size_pulls / found), 1, 0.25);
    gsl_rng_free(random);
}

static void test_across_an_off_state(void)
{
    g_autoptr(RfFieldTimeline) timeline = usual_timeline();
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    Walk walk = usual_walk(timeline);
    walk.step_s = 12.3;
    walk.charge_after_coulomb = -1 * E;
    g_autoptr(GArray) steps = steps_of(&walk, timeline, random);
    g_assert_cmpuint(steps->len, ==, 1);
    const RfChargeStep *s = &g_array_index(steps, RfChargeStep, 0);
    g_assert_true(s->across_off);
    g_assert_cmpfloat_with_epsilon(s->time_s.value, 12, 1e-6);
    g_assert_cmpfloat_with_epsilon(s->time_s.sigma, 4 / sqrt(12), 1e-6);
    g_assert_cmpfloat(fabs(s->before_coulomb.value + 3 * E), <, 4 * s->before_coulomb.sigma);
    g_assert_cmpfloat(fabs(s->after_coulomb.value + 1 * E), <, 4 * s->after_coulomb.sigma);
    gsl_rng_free(random);
}

/* A droplet mistaken for its neighbour jumps; its speed afterwards is as before. */
static void test_jump_is_no_step(void)
{
    g_autoptr(RfFieldTimeline) timeline = usual_timeline();
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    Walk walk = usual_walk(timeline);
    walk.jump_at_s = 17.01;
    walk.jump_m = 12e-6;
    g_autoptr(GArray) steps = steps_of(&walk, timeline, random);
    g_assert_cmpuint(steps->len, ==, 0);
    gsl_rng_free(random);
}

static void test_no_field_no_step(void)
{
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    Walk walk = usual_walk(NULL);
    g_autoptr(GArray) steps = steps_of(&walk, NULL, random);
    g_assert_cmpuint(steps->len, ==, 0);
    gsl_rng_free(random);
}

static void test_whole_multiples(void)
{
    RfChargeStep step = {.change_coulomb = {-2.05 * E, 0.05 * E}};
    g_assert_cmpfloat_with_epsilon(rf_charge_step_whole_multiples_p(&step, E), 0.3173, 1e-3); /* one sigma */
    step.change_coulomb.value = 1.5 * E;
    g_assert_cmpfloat(rf_charge_step_whole_multiples_p(&step, E), <, 1e-6);
    step.change_coulomb.value = 0.1 * E; /* no step is smaller than one unit */
    g_assert_cmpfloat(rf_charge_step_whole_multiples_p(&step, E), <, 1e-6);
    step.change_coulomb.sigma = 0.4 * E;
    g_assert_cmpfloat(rf_charge_step_whole_multiples_p(&step, E), ==, 1);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/charge-step/find/no-field-no-step", test_no_field_no_step);
    g_test_add_func("/charge-step/find/none-invented", test_none_invented);
    g_test_add_func("/charge-step/find/recall-and-time", test_recall_and_time);
    g_test_add_func("/charge-step/find/across-an-off-state", test_across_an_off_state);
    g_test_add_func("/charge-step/find/jump-is-no-step", test_jump_is_no_step);
    g_test_add_func("/charge-step/whole-multiples/limits", test_whole_multiples);
    return g_test_run();
}
