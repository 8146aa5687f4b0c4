#include "physics/droplet_swap.h"

#include <gsl/gsl_errno.h>
#include <math.h>

#include "physics/charge_step.h"
#include "physics/constants.h"
#include "tests/support/droplet_walk.h"

static const double E = RF_ELEMENTARY_CHARGE_COULOMB;
static const double SWITCHES_S[] = {4, 10, 14, 20, 24, 30, 34};
static const double END_S = 38;

static Walk walk_of(const RfFieldTimeline *timeline, double radius_m, double charge_coulomb)
{
    return (Walk){.medium = &WALK_MEDIUM,
                  .timeline = timeline,
                  .radius_m = radius_m,
                  .charge_coulomb = charge_coulomb,
                  .end_s = END_S,
                  .frame_s = 1.0 / 25,
                  .exposure = 0.5,
                  .noise_m = 0.15e-6};
}

static RfFieldTimeline *usual_timeline(void)
{
    return walk_timeline_new(SWITCHES_S, G_N_ELEMENTS(SWITCHES_S), RF_FIELD_TOP_PLUS, 300, END_S);
}

/* The path of one droplet up to an instant and of another from there on, from where the first was. */
static RfTrail swapped_trail(const Walk *first, const Walk *second, double at_s, gsl_rng *random)
{
    RfTrail a = walk_trail_new(first, 1, random), b = walk_trail_new(second, 1, random);
    RfSample *s = (RfSample *)a.samples;
    size_t cut = 0;
    while (cut < a.n && s[cut].time_s < at_s) cut++;
    for (size_t i = cut; i < a.n; i++) {
        s[i].fall_m = s[cut - 1].fall_m + b.samples[i].fall_m - b.samples[cut - 1].fall_m;
        s[i].drift_m = s[cut - 1].drift_m + b.samples[i].drift_m - b.samples[cut - 1].drift_m;
    }
    walk_trail_clear(&b);
    return a;
}

typedef struct {
    unsigned changes, steps, swaps; /* paths, of which with a step found, of which held for another droplet */
    double time_miss_s;             /* largest, of those */
} Verdicts;

/* As rf_droplet_set_measure asks, step by step. */
static void judge(const RfTrail *trail, const RfFieldTimeline *timeline, double at_s, Verdicts *verdicts)
{
    RfDropletModel model = {.medium = &WALK_MEDIUM, .timeline = timeline};
    RfDropletFit fit;
    rf_droplet_fit(trail, &model, &fit);
    g_autoptr(GArray) steps = rf_charge_step_find(trail, &model, &fit);
    double time_s[RF_DROPLET_SPELLS_MAX];
    bool is_swap = false;
    model.step_s = time_s;
    model.steps = steps->len;
    for (guint k = 0; k < steps->len; k++) time_s[k] = g_array_index(steps, RfChargeStep, k).time_s.value;
    for (guint k = 0; k < steps->len; k++) {
        const RfChargeStep *step = &g_array_index(steps, RfChargeStep, k);
        double half_s = step->across_off ? 0.5 * sqrt(12) * step->time_s.sigma : 0;
        RfDropletSwap swap;
        if (!rf_droplet_swap_weigh(trail, &model, k, time_s[k] - half_s, time_s[k] + half_s, &swap) ||
            swap.log_odds < 0)
            continue;
        is_swap = true;
        verdicts->time_miss_s = fmax(verdicts->time_miss_s, fabs(swap.time_s - at_s));
    }
    verdicts->changes++;
    verdicts->steps += steps->len > 0;
    verdicts->swaps += is_swap;
}

/* Odds of 100 for a step beforehand: fewer than one in a hundred, with these sigmas far fewer. */
static void test_steps_stay_steps(void)
{
    g_autoptr(RfFieldTimeline) timeline = usual_timeline();
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    Verdicts verdicts = {0};
    for (int i = 0; i < 300; i++) {
        Walk walk = walk_of(timeline, (0.35 + 0.0015 * i) * 1e-6, E * (i % 7 - 3));
        walk.step_s = 5 + 28 * gsl_rng_uniform(random);
        walk.charge_after_coulomb = walk.charge_coulomb + E * (1 + i % 3) * (i % 2 ? 1 : -1);
        RfTrail trail = walk_trail_new(&walk, 1, random);
        judge(&trail, timeline, walk.step_s, &verdicts);
        walk_trail_clear(&trail);
    }
    g_test_message("%u steps, %u found, %u held for another droplet", verdicts.changes, verdicts.steps,
                   verdicts.swaps);
    g_assert_cmpuint(verdicts.steps, >=, 280);
    g_assert_cmpuint(verdicts.swaps, <=, 1);
    gsl_rng_free(random);
}

/* Another droplet, larger or smaller by 30 to 60 %, with another charge. */
static void test_swaps_are_told(void)
{
    g_autoptr(RfFieldTimeline) timeline = usual_timeline();
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    Verdicts verdicts = {0};
    for (int i = 0; i < 120; i++) {
        double factor = 1.3 + 0.3 * gsl_rng_uniform(random), small_m = (0.4 + 0.001 * i) * 1e-6;
        double at_s = 8 + 22 * gsl_rng_uniform(random);
        Walk a = walk_of(timeline, i % 2 ? small_m : small_m * factor, E * (i % 7 - 3));
        Walk b = walk_of(timeline, i % 2 ? small_m * factor : small_m, E * (i % 7 - 3 + (i % 3 ? 2 : -3)));
        RfTrail trail = swapped_trail(&a, &b, at_s, random);
        judge(&trail, timeline, at_s, &verdicts);
        walk_trail_clear(&trail);
    }
    g_test_message("%u swaps, %u with a change found, %u held for another droplet, %.2f s off at most",
                   verdicts.changes, verdicts.steps, verdicts.swaps, verdicts.time_miss_s);
    g_assert_cmpuint(verdicts.steps, >=, 105);
    g_assert_cmpuint(verdicts.swaps * 100, >=, verdicts.steps * 90);
    gsl_rng_free(random);
}

static void test_too_short_says_nothing(void)
{
    g_autoptr(RfFieldTimeline) timeline = usual_timeline();
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    Walk walk = walk_of(timeline, 0.5e-6, 3 * E);
    RfTrail trail = walk_trail_new(&walk, 1, random);
    double step_s = END_S - 0.2;
    RfDropletModel model = {.medium = &WALK_MEDIUM, .timeline = timeline, .step_s = &step_s, .steps = 1};
    RfDropletSwap swap;
    g_assert_false(rf_droplet_swap_weigh(&trail, &model, 0, step_s, step_s, &swap));
    walk_trail_clear(&trail);
    gsl_rng_free(random);
}

/* Another path that ends there makes a larger droplet of two; one that ends elsewhere doesn't. */
static void test_kinds(void)
{
    const RfSample through[] = {{0, 0, 0, 1e-7, 1e-7}, {1, 1e-5, 0, 1e-7, 1e-7}, {2, 2e-5, 0, 1e-7, 1e-7}};
    const RfSample near[] = {{0, 5e-5, 0, 1e-7, 1e-7}, {0.9, 2e-5, 0, 1e-7, 1e-7}};
    const RfSample far[] = {{0, 5e-4, 0, 1e-7, 1e-7}, {0.9, 4e-4, 0, 1e-7, 1e-7}};
    RfTrail trails[] = {{1, 3, through}, {2, 2, far}, {3, 2, near}};
    RfDropletSwap grows = {.time_s = 1, .log_radius_change = {0.2, 0.02}};
    RfDropletSwap shrinks = {.time_s = 1, .log_radius_change = {-0.2, 0.02}};
    size_t partner = 0;
    g_assert_cmpint(rf_droplet_swap_kind(trails, 3, 0, &grows, &partner), ==, RF_SWAP_MERGED);
    g_assert_cmpuint(partner, ==, 2);
    g_assert_cmpint(rf_droplet_swap_kind(trails, 2, 0, &grows, &partner), ==, RF_SWAP_TAKEN_OVER);
    g_assert_cmpint(rf_droplet_swap_kind(trails, 3, 0, &shrinks, &partner), ==, RF_SWAP_TAKEN_OVER);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/droplet-swap/weigh/too-short-says-nothing", test_too_short_says_nothing);
    g_test_add_func("/droplet-swap/weigh/steps-stay-steps", test_steps_stay_steps);
    g_test_add_func("/droplet-swap/weigh/swaps-are-told", test_swaps_are_told);
    g_test_add_func("/droplet-swap/kind/who-ends-there", test_kinds);
    return g_test_run();
}
