#include "tracker/motion.h"

#include <glib.h>
#include <math.h>

/* Field unknown: velocities may change; 30 exposures/s. */
static const RfMotionModel blind = {.noise = {8, 2, 2}, .velocity_sd_px_s = {15, 40}, .change_cost = 5.5};
static const RfMotionModel knowing = {
    .noise = {8, 2, 2}, .velocity_sd_px_s = {15, 40}, .response_sd_px_s = {20, 60}, .change_cost = 8};

static RfSight sight_at(double x_px, double y_px)
{
    return (RfSight){{x_px, y_px}, {0.01, 0.01}, 4};
}

/* A droplet seen for so many exposures moving down at that speed. */
static RfMotion follow(const RfMotionModel *model, int exposures, double vy_px_s, double prior_factor)
{
    RfMotion m;
    RfSight first = sight_at(100, 0);
    rf_motion_start(&m, model, &first, prior_factor);
    for (int i = 1; i < exposures; i++) {
        RfSight sight = sight_at(100, vy_px_s * i / 30);
        rf_motion_predict(&m, model, 1.0 / 30, 0);
        rf_motion_update(&m, &sight);
    }
    return m;
}

static void test_density(void)
{
    /* -log of a normal density at its centre: log(2 pi sx sy) */
    RfMotion m = {.axis = {{.position_px = 3, .pp = 0.24}, {.position_px = 5, .pp = 0.08}}};
    RfSight sight = sight_at(3, 5);
    g_assert_true(fabs(rf_motion_surprise(&m, &blind, &sight, NULL) - log(2 * G_PI * 0.5 * 0.3)) < 1e-9);
}

static void test_change_is_noticed(void)
{
    RfMotion m = follow(&blind, 60, 30, 1);
    rf_motion_predict(&m, &blind, 1.0 / 30, 0);
    bool is_changed = true;
    RfSight on = sight_at(100, m.axis[1].position_px + 0.4),
            turned = sight_at(100, m.axis[1].position_px - 5);
    rf_motion_surprise(&m, &blind, &on, &is_changed);
    g_assert_false(is_changed);
    rf_motion_surprise(&m, &blind, &turned, &is_changed);
    g_assert_true(is_changed);
    rf_motion_loosen(&m, &blind);
    rf_motion_update(&m, &turned);
    g_assert_cmpfloat(m.axis[1].velocity_px_s, <, -20);
    g_assert_true(m.unseen_s == 0);
}

/* What may change is the response while the field is known to be on, else the velocity: the course may lack a switch. */
static void test_what_changes(void)
{
    for (int is_on = 0; is_on < 2; is_on++) {
        RfMotion m = follow(&knowing, 60, 30, 1);
        for (int i = 60; i < 120; i++) { /* a field that doesn't move it: the response is known as well */
            RfSight sight = sight_at(100, i);
            rf_motion_predict(&m, &knowing, 1.0 / 30, 1.0 / 30);
            rf_motion_update(&m, &sight);
        }
        double velocity_px_s = m.axis[1].velocity_px_s, response_px_s = m.axis[1].response_px_s;
        rf_motion_predict(&m, &knowing, 1.0 / 30, is_on / 30.0);
        bool is_changed = false;
        RfSight turned = sight_at(100, m.axis[1].position_px - 5);
        rf_motion_surprise(&m, &knowing, &turned, &is_changed);
        g_assert_true(is_changed);
        rf_motion_loosen(&m, &knowing);
        rf_motion_update(&m, &turned);
        double faster_px_s = m.axis[1].velocity_px_s - velocity_px_s,
               stronger_px_s = m.axis[1].response_px_s - response_px_s;
        g_assert_cmpfloat(is_on ? stronger_px_s : faster_px_s, <, -40);
        g_assert_cmpfloat(fabs(is_on ? faster_px_s : stronger_px_s), <, 10);
    }
}

static void test_reach(void)
{
    RfMotion m = follow(&blind, 10, 30, 1);
    rf_motion_predict(&m, &blind, 1.0 / 30, 0);
    double reach_px[2];
    rf_motion_reach(&m, &blind, 15, reach_px);
    for (int i = -400; i <= 400; i++) {
        RfSight sight = sight_at(100, m.axis[1].position_px + i * 0.1);
        if (rf_motion_surprise(&m, &blind, &sight, NULL) < 15)
            g_assert_cmpfloat(fabs(i * 0.1), <=, reach_px[1]);
    }
}

/* Over half a second: the same speed speaks for one droplet, another speed against, the more the longer both were seen. */
static void test_likeness(void)
{
    double odds[3];
    const double speeds[] = {30, 45, 90};
    for (int i = 0; i < 3; i++) {
        RfMotion a = follow(&blind, 60, 30, 1), b = follow(&blind, 60, -speeds[i], 10);
        rf_motion_predict(&a, &blind, 0.5, 0);
        /* b was filtered from its far end back to its first sight: turn it round and put it where a is expected */
        b.axis[1].velocity_px_s = -b.axis[1].velocity_px_s;
        b.axis[1].pv = -b.axis[1].pv;
        b.axis[1].position_px = a.axis[1].position_px + 1;
        odds[i] = rf_motion_likeness(&a, &b, &blind, false);
    }
    g_test_message("log odds at 30, 45, 90 px/s: %.1f %.1f %.1f", odds[0], odds[1], odds[2]);
    g_assert_cmpfloat(odds[0], >, odds[1] + 1);
    g_assert_cmpfloat(odds[1], >, odds[2] + 10);
}

static void test_likeness_may_change(void)
{
    RfMotion a = follow(&blind, 60, 30, 1), b = follow(&blind, 60, 60, 10);
    rf_motion_predict(&a, &blind, 0.1, 0);
    b.axis[1].position_px = a.axis[1].position_px;
    g_assert_cmpfloat(rf_motion_likeness(&a, &b, &blind, true), >,
                      rf_motion_likeness(&a, &b, &blind, false) + 5);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/motion/surprise/normal-density", test_density);
    g_test_add_func("/motion/surprise/change-is-noticed", test_change_is_noticed);
    g_test_add_func("/motion/surprise/field-decides-what-changes", test_what_changes);
    g_test_add_func("/motion/reach/covers-the-gate", test_reach);
    g_test_add_func("/motion/likeness/speed", test_likeness);
    g_test_add_func("/motion/likeness/change", test_likeness_may_change);
    return g_test_run();
}
