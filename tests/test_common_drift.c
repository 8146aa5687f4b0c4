#include "physics/common_drift.h"

#include <gsl/gsl_errno.h>
#include <gsl/gsl_randist.h>
#include <gsl/gsl_rng.h>
#include <math.h>

enum { PATHS = 10, SAMPLES = 1200 };

typedef struct {
    double time_s[SAMPLES], place_m[PATHS][SAMPLES];
    RfDriftPath path[PATHS];
} Air;

/* Ten droplets with D = 2e-11 m^2/s and speeds of their own, in air that sways with a period of 25 s. */
static void stir(Air *air, double sway_m_s)
{
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    for (int i = 0; i < SAMPLES; i++) air->time_s[i] = i / 30.0;
    for (int j = 0; j < PATHS; j++) {
        for (int i = 0; i < SAMPLES; i++) {
            double t = air->time_s[i], common = sway_m_s * 25 / (2 * M_PI) * sin(2 * M_PI * t / 25);
            double wander = i == 0 ? 0 : gsl_ran_gaussian(random, sqrt(2 * 2e-11 / 30));
            air->place_m[j][i] = (i == 0 ? 0 : air->place_m[j][i - 1]) + wander + 1e-6 * j / 30;
            if (i > 0)
                air->place_m[j][i] +=
                    common - sway_m_s * 25 / (2 * M_PI) * sin(2 * M_PI * (t - 1 / 30.0) / 25);
        }
        air->path[j] = (RfDriftPath){SAMPLES, air->time_s, air->place_m[j], 2e-11, 1e-14};
    }
    gsl_rng_free(random);
}

static void test_none_from_still_air(void)
{
    Air *air = g_new(Air, 1);
    double p;
    stir(air, 0);
    g_autoptr(RfCommonDrift) drift = rf_common_drift_new();
    g_assert_cmpfloat(rf_common_drift_fit(air->path, PATHS, drift->fall_time_s, drift->fall_m_s, &p), ==, 0);
    g_assert_cmpfloat(p, >, 1e-3);
    g_assert_cmpuint(drift->fall_time_s->len, ==, 0);
    g_assert_cmpfloat(rf_common_drift_fall_m(drift, 10), ==, 0);
    g_free(air);
}

/* 5 um/s of sway, 14 um rms in displacement. The mean of ten wandering droplets about its own line is sqrt(2 D/10 40 s/15)
 * = 3.3 um rms: that much can't be told from drift, and twice that is the limit. */
static void test_sway_followed(void)
{
    Air *air = g_new(Air, 1);
    double p, mean = 0, squares = 0;
    stir(air, 5e-6);
    g_autoptr(RfCommonDrift) drift = rf_common_drift_new();
    double rms = rf_common_drift_fit(air->path, PATHS, drift->across_time_s, drift->across_m_s, &p);
    g_assert_cmpfloat(p, <, 1e-6);
    g_assert_cmpfloat_with_epsilon(rms, 5e-6 / sqrt(2), 1e-6);
    double miss[40], slope = 0;
    for (int t = 0; t < 40; t++) {
        miss[t] = rf_common_drift_across_m(drift, t) - 5e-6 * 25 / (2 * M_PI) * sin(2 * M_PI * t / 25.0);
        mean += miss[t] / 40;
    }
    for (int t = 0; t < 40; t++) slope += (miss[t] - mean) * (t - 19.5) / (40 * (1600 - 1) / 12.0);
    for (int t = 0; t < 40; t++) squares += pow(miss[t] - mean - slope * (t - 19.5), 2) / 40;
    g_test_message("rms of the displacement's error %.2f um", sqrt(squares) * 1e6);
    g_assert_cmpfloat(sqrt(squares), <, 6.6e-6);
    g_free(air);
}

static void test_nothing_given(void)
{
    g_assert_cmpfloat(rf_common_drift_across_m(NULL, 3), ==, 0);
    g_autoptr(RfCommonDrift) drift = rf_common_drift_new();
    double p;
    g_assert_cmpfloat(rf_common_drift_fit(NULL, 0, drift->across_time_s, drift->across_m_s, &p), ==, 0);
    g_assert_cmpfloat(p, ==, 1);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/common-drift/fit/nothing-given", test_nothing_given);
    g_test_add_func("/common-drift/fit/none-from-still-air", test_none_from_still_air);
    g_test_add_func("/common-drift/fit/sway-followed", test_sway_followed);
    return g_test_run();
}
