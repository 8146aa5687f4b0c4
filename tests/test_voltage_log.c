#include "calib/voltage_log.h"

#include <gsl/gsl_errno.h>
#include <gsl/gsl_randist.h>
#include <math.h>
#include <stdio.h>
#include <string.h>

enum { SAMPLES = 1000 };

/* A supply: off, +300 V, off, -300 V, each some 20 s, seen every 0.1 s. */
typedef struct {
    double noise_V, ramp_s, ripple_V, drift_V_s;
    double slip_every; /* samples; 0: none */
} Supply;

static const double switch_s[] = {20.033, 41.271, 60.528, 80.844}, level_V[] = {0, 300, 0, -300, 0};

static double supply_V(const Supply *supply, double at_s)
{
    double v = level_V[0] + supply->drift_V_s * at_s;
    for (int i = 0; i < 4; i++) {
        double part = supply->ramp_s > 0.0 ? CLAMP((at_s - switch_s[i]) / supply->ramp_s + 0.5, 0.0, 1.0)
                                           : (at_s >= switch_s[i] ? 1.0 : 0.0);
        v += part * (level_V[i + 1] - level_V[i]);
    }
    return v + supply->ripple_V * sin(2.0 * M_PI * 7.3 * at_s);
}

static RfVoltageLog *record(const Supply *supply)
{
    static double time_s[SAMPLES], voltage_V[SAMPLES];
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, 11);
    for (int i = 0; i < SAMPLES; i++) {
        time_s[i] = 0.1 * i + 0.01 * gsl_rng_uniform(random);
        voltage_V[i] = supply_V(supply, time_s[i]) + gsl_ran_gaussian(random, supply->noise_V);
        if (supply->slip_every > 0.0 && fmod(i, supply->slip_every) == 57) voltage_V[i] = 999.0;
    }
    gsl_rng_free(random);
    g_autoptr(GError) error = NULL;
    RfVoltageLog *log = rf_voltage_log_from_samples(time_s, voltage_V, SAMPLES, "log", &error);
    g_assert_no_error(error);
    return log;
}

static void check_levels(const RfVoltageLog *log, double tolerance_V)
{
    g_assert_cmpuint(log->spells->len, ==, 5);
    g_assert_cmpuint(log->switches->len, ==, 4);
    for (unsigned i = 0; i < 5; i++) {
        const RfLogSpell *spell = &g_array_index(log->spells, RfLogSpell, i);
        g_assert_cmpint(spell->sign, ==, (level_V[i] > 0) - (level_V[i] < 0));
        g_assert_cmpfloat_with_epsilon(spell->voltage_V.value, level_V[i], tolerance_V);
    }
    for (unsigned i = 0; i < 4; i++) {
        RfLogSwitch change = g_array_index(log->switches, RfLogSwitch, i);
        g_test_message("switch %.3f(%.3f) s, truth %.3f", change.time_s.value, change.time_s.sigma,
                       switch_s[i]);
        g_assert_cmpfloat(fabs(change.time_s.value - switch_s[i]), <, 0.06);
        g_assert_cmpfloat(fabs(change.time_s.value - switch_s[i]), <, 3.0 * change.time_s.sigma);
    }
}

static void clean_steps(void)
{
    Supply supply = {0};
    g_autoptr(RfVoltageLog) log = record(&supply);
    check_levels(log, 1e-9);
    g_assert_cmpfloat_with_epsilon(log->interval_s, 0.1, 0.001);
}

static void noise_does_not_switch(void)
{
    Supply supply = {.noise_V = 1.5};
    g_autoptr(RfVoltageLog) log = record(&supply);
    check_levels(log, 4.0 * 1.5 / sqrt(190));
    g_assert_cmpfloat_with_epsilon(log->noise_V, 1.5, 0.2);
    const RfLogSpell *spell = &g_array_index(log->spells, RfLogSpell, 1);
    g_assert_cmpfloat_with_epsilon(spell->voltage_V.sigma, 1.5 / sqrt(spell->samples), 0.03);
}

static void ripple_and_drift_are_no_switches(void)
{
    Supply supply = {.noise_V = 0.2, .ripple_V = 6.0, .drift_V_s = 0.05};
    g_autoptr(RfVoltageLog) log = record(&supply);
    check_levels(log, 6.0);
    g_assert_cmpfloat_with_epsilon(g_array_index(log->spells, RfLogSpell, 1).ripple_V, 6.0 / sqrt(2.0), 0.5);
}

static void ramps_belong_to_no_level(void)
{
    Supply supply = {.noise_V = 0.2, .ramp_s = 1.5};
    g_autoptr(RfVoltageLog) log = record(&supply);
    check_levels(log, 1.0);
    g_assert_cmpfloat_with_epsilon(g_array_index(log->switches, RfLogSwitch, 0).ramp_s, 1.5, 0.25);
}

static void slips_of_the_meter(void)
{
    Supply supply = {.noise_V = 0.3, .slip_every = 150};
    g_autoptr(RfVoltageLog) log = record(&supply);
    check_levels(log, 0.2);
}

static void never_switched(void)
{
    static const double time_s[] = {0, 1, 2, 3, 4, 5, 6, 7}, voltage_V[] = {.1, -.1, .2, 0, .1, -.2, .1, 0};
    g_autoptr(RfVoltageLog) log = rf_voltage_log_from_samples(time_s, voltage_V, 8, "log", NULL);
    g_assert_nonnull(log);
    g_assert_cmpuint(log->spells->len, ==, 1);
    g_assert_cmpint(g_array_index(log->spells, RfLogSpell, 0).sign, ==, 0);
}

static void refuse(const double *time_s, size_t n, int code, const char *needle)
{
    double voltage_V[] = {0, 300, 0, 300, 0, 300, 0, 300};
    g_autoptr(GError) error = NULL;
    g_assert_null(rf_voltage_log_from_samples(time_s, voltage_V, n, "volts.csv", &error));
    g_assert_error(error, RF_VOLTAGE_LOG_ERROR, code);
    g_assert_nonnull(strstr(error->message, needle));
    g_assert_true(g_str_has_prefix(error->message, "volts.csv: "));
}

static void logs_that_will_not_do(void)
{
    static const double rising_s[] = {0, 1, 2, 3, 4, 5, 6, 7}, back_s[] = {0, 1, 2, 1.5, 4, 5, 6, 7},
                        twice_s[] = {0, 1, 2, 2, 4, 5, 6, 7};
    refuse(rising_s, 0, RF_VOLTAGE_LOG_ERROR_SHORT, "0 samples");
    refuse(rising_s, 4, RF_VOLTAGE_LOG_ERROR_SHORT, "at least 6");
    refuse(back_s, 8, RF_VOLTAGE_LOG_ERROR_TIME, "from 2 s to 1.5 s");
    refuse(twice_s, 8, RF_VOLTAGE_LOG_ERROR_TIME, "from 2 s to 2 s");
}

static void a_file_in_its_own_units(void)
{
    g_autoptr(GString) text = g_string_new("U (kV);Zeit;Time [ms]\r\n");
    for (int i = 0; i < 40; i++)
        g_string_append_printf(text, "%s;x;%d,5\r\n", i < 20 ? "0,0" : "0,25", 100 * i);
    g_autofree char *path = g_build_filename(g_get_tmp_dir(), "rf_voltage_log_test.csv", NULL);
    g_assert_true(g_file_set_contents(path, text->str, -1, NULL));
    g_autoptr(GError) error = NULL;
    g_autoptr(RfVoltageLog) log = rf_voltage_log_read(path, &error);
    g_assert_no_error(error);
    g_assert_cmpuint(log->spells->len, ==, 2);
    g_assert_cmpfloat_with_epsilon(g_array_index(log->spells, RfLogSpell, 1).voltage_V.value, 250.0, 1e-9);
    g_assert_cmpfloat_with_epsilon(g_array_index(log->switches, RfLogSwitch, 0).time_s.value, 1.9505, 1e-9);
    g_assert_true(g_file_set_contents(path, "time_s,level\n1,2\n", -1, NULL));
    g_assert_null(rf_voltage_log_read(path, &error));
    g_assert_error(error, RF_TABLE_ERROR, RF_TABLE_ERROR_COLUMN);
    remove(path);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/voltage_log/from_samples/clean-steps", clean_steps);
    g_test_add_func("/voltage_log/from_samples/noise-does-not-switch", noise_does_not_switch);
    g_test_add_func("/voltage_log/from_samples/ripple-and-drift-are-no-switches",
                    ripple_and_drift_are_no_switches);
    g_test_add_func("/voltage_log/from_samples/ramps-belong-to-no-level", ramps_belong_to_no_level);
    g_test_add_func("/voltage_log/from_samples/slips-of-the-meter", slips_of_the_meter);
    g_test_add_func("/voltage_log/from_samples/never-switched", never_switched);
    g_test_add_func("/voltage_log/from_samples/logs-that-will-not-do", logs_that_will_not_do);
    g_test_add_func("/voltage_log/read/a-file-in-its-own-units", a_file_in_its_own_units);
    return g_test_run();
}
