#include "cli/simulate_bounds.h"

#include "support/scene_from_text.h"

#include <gsl/gsl_errno.h>
#include <math.h>

static const double e = 1.602176634e-19;

/* 20 s with the field off, then 20 s on, 30 exposures a second, each position good to s_m. */
static RfRecord *record_of(double radius_m, int units, double s_m)
{
    RfRecord *record = rf_simulate_record_new();
    record->exposure_interval_s = 1. / 30;
    record->exposure_s = 0;
    record->scale_px_m = 4e5;
    g_autoptr(GArray) spells = g_array_new(FALSE, FALSE, sizeof(RfSpell));
    RfSpell first = {.time_s = -HUGE_VAL, .units = units};
    g_array_append_val(spells, first);
    RfLife *life = rf_simulate_record_add(record, rf_simulate_motion_body_new(0, radius_m, 100, spells));
    for (int i = 0; i < 1200; i++) {
        RfSeenAt at = {.frame = i,
                       .time_s = i / 30.,
                       .is_visible = true,
                       .is_in_view = true,
                       .snr = 10,
                       .bound_px = s_m * 4e5};
        g_array_append_val(life->seen, at);
    }
    rf_simulate_record_cut(record);
    return record;
}

/* Bounds for q = 3 e, 500 V over 6 mm, s = 0.5 um unknown, from a separate program (NumPy) that inverts the covariance
 * matrix of all 1199 increments on both axes and takes the derivatives numerically: in e, from velocities alone and
 * jointly, for an instantaneous exposure and one that lasts the whole interval (R = 0, 1/6). */
static void test_agrees_with_the_whole_path(void)
{
    const struct {
        double radius_m, exposure, alone_e, joint_e;
    } known[] = {{0.3e-6, 0, 0.36627, 0.14051},   {0.5e-6, 0, 0.082963, 0.071363},
                 {1.0e-6, 0, 0.029097, 0.029080}, {0.3e-6, 1, 0.36617, 0.12699},
                 {0.5e-6, 1, 0.082947, 0.069500}, {1.0e-6, 1, 0.029090, 0.029071}};
    g_autoptr(RfScene) scene = scene_from_text(
        "[cell]\nplate_gap=6 mm\ngravity=9.8106 m/s^2\n[oil]\ndensity=886 kg/m^3\n[air]\ntemperature=23 "
        "degC\n"
        "pressure=101.3 kPa\nhumidity=45 %\n[supply]\nvoltage=500 V\n[field]\nswitches=0 off; 20 top+\n");
    g_autoptr(RfWorld) world = rf_simulate_world_new(scene);
    for (size_t i = 0; i < G_N_ELEMENTS(known); i++) {
        g_autoptr(RfRecord) record = record_of(known[i].radius_m, 3, 0.5e-6);
        record->exposure_s = known[i].exposure * record->exposure_interval_s;
        g_autoptr(RfDropletBounds) bounds =
            rf_simulate_bounds_of(record, world, &g_array_index(record->droplets, RfTrueDroplet, 0));
        const RfBoundSpell *spell = &g_array_index(bounds->spells, RfBoundSpell, 0);
        double alone_e = spell->bound_charge_coulomb / e, joint_e = spell->bound_joint_charge_coulomb / e;
        g_test_message("%.1f um: %.4f e alone, %.4f e jointly", known[i].radius_m * 1e6, alone_e, joint_e);
        g_assert_cmpfloat_with_epsilon(alone_e / known[i].alone_e, 1, 0.005);
        g_assert_cmpfloat_with_epsilon(joint_e / known[i].joint_e, 1, 0.005);
    }
}

/* Without localisation error to find, var(ln D) = 2/N; with the noise unknown and R = 0, Vestergaard's covariance
 * estimator reaches 6/N for s = 0 (Phys. Rev. E 89 (2014) 022726, from memory, unverified) and no estimator can do worse
 * than one half per increment allows. */
static void test_spread_information_is_between_its_limits(void)
{
    double free_of_noise = rf_simulate_bounds_spread_information(2e-11, 1. / 30, 0, 0);
    g_assert_cmpfloat(free_of_noise, <, 0.5);
    g_assert_cmpfloat(free_of_noise, >=, 1. / 6 - 1e-9);
    double noisy = rf_simulate_bounds_spread_information(2e-11, 1. / 30, 0, 1e-6);
    g_assert_cmpfloat(noisy, <, free_of_noise);
    g_assert_cmpfloat(noisy, >, 0);
}

static void test_no_field_no_charge(void)
{
    g_autoptr(RfScene) scene = scene_from_text("[supply]\nstates=off\n");
    g_autoptr(RfWorld) world = rf_simulate_world_new(scene);
    g_autoptr(RfRecord) record = record_of(0.5e-6, 3, 1e-7);
    g_autoptr(RfDropletBounds) bounds =
        rf_simulate_bounds_of(record, world, &g_array_index(record->droplets, RfTrueDroplet, 0));
    const RfBoundSpell *spell = &g_array_index(bounds->spells, RfBoundSpell, 0);
    g_assert_cmpfloat(spell->bound_charge_coulomb, <, 0);
    g_assert_cmpfloat(spell->on_s, ==, 0);
    g_assert_cmpfloat_with_epsilon(spell->off_s, 40, 1e-9);
    /* sqrt(2 D/T) for a long watch */
    double plain_m_s = sqrt(2 * rf_drag_diffusion_m2_s(&world->medium, 0.5e-6) / 40);
    g_assert_cmpfloat_with_epsilon(bounds->bound_fall_m_s / plain_m_s, 1, 0.01);
}

static void hide(RfLife *life, int first, int end, bool is_out_of_view)
{
    for (int i = first; i < end; i++) {
        RfSeenAt *at = &g_array_index(life->seen, RfSeenAt, i);
        at->is_visible = false;
        at->is_in_view = !is_out_of_view;
    }
}

static void test_absence_makes_a_new_droplet(void)
{
    g_autoptr(RfRecord) record = record_of(0.5e-6, 3, 1e-7);
    RfLife *life = g_ptr_array_index(record->lives, 0);
    hide(life, 300, 329, true); /* away for less than a second */
    rf_simulate_record_cut(record);
    g_assert_cmpint((int)record->droplets->len, ==, 1);
    hide(life, 300, 340, false); /* hardly to be seen near the border for longer, but never out of the view */
    rf_simulate_record_cut(record);
    g_assert_cmpint((int)record->droplets->len, ==, 1);
    hide(life, 300, 340, true);
    rf_simulate_record_cut(record);
    g_assert_cmpint((int)record->droplets->len, ==, 2);
    const RfTrueDroplet *second = &g_array_index(record->droplets, RfTrueDroplet, 1);
    g_assert_cmpint((int)second->first, ==, 340);
    g_assert_null(rf_simulate_record_at(record, second, 10.5));
    g_assert_nonnull(rf_simulate_record_at(record, second, 20));
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/simulate-bounds/of/agrees-with-the-whole-path", test_agrees_with_the_whole_path);
    g_test_add_func("/simulate-bounds/of/no-field-no-charge", test_no_field_no_charge);
    g_test_add_func("/simulate-bounds/spread-information/between-its-limits",
                    test_spread_information_is_between_its_limits);
    g_test_add_func("/simulate-record/cut/absence-makes-a-new-droplet", test_absence_makes_a_new_droplet);
    return g_test_run();
}
