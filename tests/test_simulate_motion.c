#include "cli/simulate_motion.h"

#include "support/scene_from_text.h"

#include <gsl/gsl_errno.h>
#include <math.h>

static const double exact_e = 1.602176634e-19; /* SI, 2019 */

static RfBody *body_of(double radius_m, int units)
{
    g_autoptr(GArray) spells = g_array_new(FALSE, FALSE, sizeof(RfSpell));
    RfSpell first = {.time_s = -HUGE_VAL, .units = units};
    g_array_append_val(spells, first);
    return rf_simulate_motion_body_new(0, radius_m, 100, spells);
}

typedef struct {
    double mean, variance;
} Moments;

static Moments moments_of(const double *x, int n)
{
    Moments m = {0, 0};
    for (int i = 0; i < n; i++) m.mean += x[i] / n;
    for (int i = 0; i < n; i++) m.variance += (x[i] - m.mean) * (x[i] - m.mean) / (n - 1);
    return m;
}

enum { STEPS = 40000 };

/* Many steps of a droplet in the given field; increments along and across gravity. */
static void walk(const RfScene *scene, int units, double step_s, double *fall_m, double *drift_m,
                 RfWorld **world)
{
    *world = rf_simulate_world_new(scene);
    gsl_rng *random = rf_simulate_world_stream(scene, RF_STREAM_MOTION);
    RfBody *body = body_of(0.5e-6, units);
    for (int i = 0; i < STEPS; i++) {
        RfPlace before = body->place;
        rf_simulate_motion_advance(body, *world, i * step_s, (i + 1) * step_s, random);
        fall_m[i] = body->place.fall_m - before.fall_m;
        drift_m[i] = body->place.drift_m - before.drift_m;
    }
    rf_simulate_motion_body_free(body);
    gsl_rng_free(random);
}

/* Settling speed and D from first principles here: 6 pi eta a/Cc, Stokes-Einstein; Cc by the medium's own numbers. */
static double hand_drag_kg_s(const RfMedium *m, double a)
{
    double kn = m->mean_free_path_m / a;
    double cc = 1 + kn * (m->slip.alpha + m->slip.beta * exp(-m->slip.gamma / kn));
    return 6 * G_PI * m->viscosity_pa_s * a / cc;
}

static void check_walk(int units, const char *field, double sign)
{
    g_autofree char *text = g_strdup_printf("[motion]\ndrift=0 um/s\n[field]\nswitches=0 %s\n", field);
    g_autoptr(RfScene) scene = scene_from_text(text);
    g_autofree double *fall_m = g_new(double, STEPS), *drift_m = g_new(double, STEPS);
    g_autoptr(RfWorld) world = NULL;
    const double step_s = 1. / 30, a = 0.5e-6;
    walk(scene, units, step_s, fall_m, drift_m, &world);
    const RfMedium *medium = &world->medium;
    double k = hand_drag_kg_s(medium, a);
    double weight = 4. / 3 * G_PI * a * a * a * (medium->oil_density_kg_m3 - medium->air_density_kg_m3) *
                    medium->gravity_m_s2;
    double speed = weight / k + sign * units * exact_e * world->voltage_v / (k * medium->plate_gap_m);
    double variance = 2 * 1.380649e-23 * medium->temperature_kelvin / k * step_s;
    Moments along = moments_of(fall_m, STEPS), across = moments_of(drift_m, STEPS);
    double mean_sigma = sqrt(variance / STEPS), variance_sigma = variance * sqrt(2. / STEPS);
    g_test_message("speed %.4g of %.4g m/s, variance ratio %.4f, %.4f", along.mean / step_s, speed,
                   along.variance / variance, across.variance / variance);
    g_assert_cmpfloat_with_epsilon(along.mean, speed * step_s, 4 * mean_sigma);
    g_assert_cmpfloat_with_epsilon(across.mean, 0, 4 * mean_sigma);
    g_assert_cmpfloat_with_epsilon(along.variance, variance, 4 * variance_sigma);
    g_assert_cmpfloat_with_epsilon(across.variance, variance, 4 * variance_sigma);
}

static void test_neutral_droplet_only_settles(void)
{
    check_walk(0, "top+", 1);
}

static void test_field_off_only_settles(void)
{
    check_walk(-3, "off", 0);
}

static void test_positive_charge_falls_faster_under_top_plus(void)
{
    check_walk(3, "top+", 1);
}

static void test_negative_charge_falls_faster_under_top_minus(void)
{
    check_walk(-3, "top-", -1);
}

static void test_push_is_exact_through_switches_and_steps(void)
{
    g_autoptr(RfScene) scene =
        scene_from_text("[supply]\nvoltage=100 V\n[field]\nswitches=0 off; 1 top+; 2 off\n");
    g_autoptr(RfWorld) world = rf_simulate_world_new(scene);
    RfBody *body = body_of(0.5e-6, 2);
    RfSpell step = {.time_s = 1.25, .units = 6};
    g_array_append_val(body->spells, step);
    /* off 0.5 s; 2 e for 0.25 s; 6 e for 0.75 s; off 0.5 s: over 2 s */
    double mean = exact_e * 100 * (2 * 0.25 + 6 * 0.75) / 2;
    g_assert_cmpfloat_with_epsilon(rf_simulate_motion_mean_push(body, world, 0.5, 2.5) / mean, 1, 1e-12);
    g_assert_cmpfloat_with_epsilon(rf_simulate_world_on_s(world, 0.5, 2.5), 1, 1e-12);
    g_assert_cmpint(rf_simulate_motion_units_at(body, 1.2), ==, 2);
    g_assert_cmpint(rf_simulate_motion_units_at(body, 1.25), ==, 6);
    rf_simulate_motion_body_free(body);
}

static void test_step_length_does_not_matter(void)
{
    g_autoptr(RfScene) scene = scene_from_text("[motion]\ndrift=0 um/s\n[field]\nswitches=0 off\n");
    g_autoptr(RfWorld) world = rf_simulate_world_new(scene);
    gsl_rng *random = rf_simulate_world_stream(scene, RF_STREAM_MOTION);
    enum { WALKS = 4000 };
    double ends_m[WALKS];
    for (int w = 0; w < WALKS; w++) {
        RfBody *body = body_of(0.5e-6, 0);
        for (int i = 0; i < 10; i++)
            rf_simulate_motion_advance(body, world, 0.01 * i, 0.01 * (i + 1), random);
        ends_m[w] = body->place.drift_m;
        rf_simulate_motion_body_free(body);
    }
    gsl_rng_free(random);
    double variance = 2 * rf_drag_diffusion_m2_s(&world->medium, 0.5e-6) * 0.1;
    g_assert_cmpfloat_with_epsilon(moments_of(ends_m, WALKS).variance, variance,
                                   4 * variance * sqrt(2. / WALKS));
}

static void test_evaporation_follows_d_squared(void)
{
    RfBody *body = body_of(1e-6, 0);
    body->evaporation_m2_s = 1e-14;
    g_assert_cmpfloat_with_epsilon(rf_simulate_motion_radius_m(body, 36), 0.8e-6, 1e-15);
    g_assert_cmpfloat(rf_simulate_motion_radius_m(body, 1e6), ==, 5e-8);
    rf_simulate_motion_body_free(body);
}

static void test_steps_come_only_with_the_field_on(void)
{
    g_autoptr(RfScene) scene = scene_from_text("[field]\nswitches=0 off; 10 top+; 50 off\n");
    g_autoptr(RfWorld) world = rf_simulate_world_new(scene);
    gsl_rng *random = rf_simulate_world_stream(scene, RF_STREAM_BODIES);
    RfBody *body = body_of(0.5e-6, 1);
    rf_simulate_motion_add_steps(body, world, 1, 100, random);
    unsigned steps = body->spells->len - 1;
    g_assert_cmpfloat_with_epsilon(steps, 40, 4 * sqrt(40));
    for (unsigned i = 1; i <= steps; i++) {
        const RfSpell *spell = &g_array_index(body->spells, RfSpell, i);
        g_assert_true(spell->time_s >= 10 && spell->time_s <= 50);
        g_assert_cmpint(spell->units, !=, spell[-1].units);
        g_assert_cmpint(spell->units, !=, 0);
    }
    rf_simulate_motion_body_free(body);
    gsl_rng_free(random);
}

static void test_inputs_are_drawn_as_stated(void)
{
    enum { WORLDS = 400 };
    double gaps_m[WORLDS];
    for (int i = 0; i < WORLDS; i++) {
        g_autoptr(RfScene) scene = scene_from_text("[cell]\nplate_gap=6.000(10) mm\n");
        scene->seed = 1000 + i;
        g_autoptr(RfWorld) world = rf_simulate_world_new(scene);
        gaps_m[i] = world->medium.plate_gap_m;
    }
    Moments gap = moments_of(gaps_m, WORLDS);
    g_assert_cmpfloat_with_epsilon(gap.mean, 6e-3, 4 * 1e-5 / sqrt(WORLDS));
    g_assert_cmpfloat_with_epsilon(sqrt(gap.variance), 1e-5, 4 * 1e-5 / sqrt(2 * WORLDS));
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/simulate-motion/advance/neutral-droplet-only-settles",
                    test_neutral_droplet_only_settles);
    g_test_add_func("/simulate-motion/advance/field-off-only-settles", test_field_off_only_settles);
    g_test_add_func("/simulate-motion/advance/positive-charge-falls-faster-under-top-plus",
                    test_positive_charge_falls_faster_under_top_plus);
    g_test_add_func("/simulate-motion/advance/negative-charge-falls-faster-under-top-minus",
                    test_negative_charge_falls_faster_under_top_minus);
    g_test_add_func("/simulate-motion/mean-push/exact-through-switches-and-steps",
                    test_push_is_exact_through_switches_and_steps);
    g_test_add_func("/simulate-motion/advance/step-length-does-not-matter", test_step_length_does_not_matter);
    g_test_add_func("/simulate-motion/radius/evaporation-follows-d-squared",
                    test_evaporation_follows_d_squared);
    g_test_add_func("/simulate-motion/add-steps/only-with-the-field-on",
                    test_steps_come_only_with_the_field_on);
    g_test_add_func("/simulate-world/new/inputs-are-drawn-as-stated", test_inputs_are_drawn_as_stated);
    return g_test_run();
}
