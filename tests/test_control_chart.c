#include "physics/control_chart.h"

#include <glib.h>
#include <gsl/gsl_errno.h>
#include <gsl/gsl_randist.h>
#include <gsl/gsl_rng.h>
#include <math.h>

/* NIST/SEMATECH e-Handbook of Statistical Methods, 6.3.2.2, "Individuals control charts", flow rates of ten batches (from
 * memory): centre 50.81, mean moving range 1.8778, limits 45.8159 and 55.8041. The page rounds d2 to 1.128. */
static const double FLOW[] = {49.6, 47.6, 49.9, 51.3, 47.8, 51.2, 52.6, 52.4, 53.6, 52.1};

static void limits_published(void)
{
    RfControlLimits limits;
    g_assert_true(rf_control_chart_limits(FLOW, G_N_ELEMENTS(FLOW), &limits));
    g_assert_cmpfloat_with_epsilon(limits.centre, 50.81, 1e-9);
    g_assert_cmpfloat_with_epsilon(limits.mean_range, 1.8778, 5e-5);
    g_assert_cmpfloat_with_epsilon(limits.lower, 45.8159, 0.003);
    g_assert_cmpfloat_with_epsilon(limits.upper, 55.8041, 0.003);
}

/* ISO 7870-2:2013 (from memory), charts of individuals: 3/d2 = 2.660 and D4 = 3.267. */
static void constants_published(void)
{
    RfControlLimits limits;
    g_assert_true(rf_control_chart_limits(FLOW, G_N_ELEMENTS(FLOW), &limits));
    g_assert_cmpfloat_with_epsilon((limits.upper - limits.centre) / limits.mean_range, 2.660, 0.0015);
    g_assert_cmpfloat_with_epsilon(limits.range_upper / limits.mean_range, 3.267, 0.0005);
}

/* Average run lengths of a chart with limits at 3 sigma: 370.4, 43.9, 6.30, 2.00 at 0, 1, 2, 3 sigma (Montgomery, Introduction
 * to Statistical Quality Control, from memory). Runs of seven alone: a fair coin shows one after 2^7 - 1 = 127 throws. */
static void run_lengths_published(void)
{
    static const double shift[] = {0, 1, 2, 3}, length[] = {370.4, 43.9, 6.30, 2.00},
                        within[] = {0.05, 0.05, 0.01, 0.005};
    for (int i = 0; i < 4; i++)
        g_assert_cmpfloat_with_epsilon(rf_control_chart_run_length(shift[i], false), length[i], within[i]);
    /* Both together: fewer points than either alone, more than their rates added up. */
    const double both = rf_control_chart_run_length(0, true);
    g_assert_cmpfloat(both, <, 127);
    g_assert_cmpfloat(both, >, 1 / (1 / 127.0 + 1 / 370.4));
}

static void signals_of_hand_made_courses(void)
{
    const RfControlLimits limits = {
        .centre = 10, .sigma = 1, .lower = 7, .upper = 13, .mean_range = 1.128, .range_upper = 3.69};
    const double course[] = {10.5, 9.5, 13.1, 10.4, 10.2, 10.3, 10.1, 10.3, 10.2,
                             10.4, 9.0, 9.1,  9.2,  9.3,  9.4,  9.5,  9.6,  9.7};
    unsigned signals[G_N_ELEMENTS(course)];
    rf_control_chart_signals(&limits, course, G_N_ELEMENTS(course), signals);
    for (size_t i = 0; i < G_N_ELEMENTS(course); i++) {
        const unsigned expected = i == 2 ? RF_CONTROL_BEYOND : 0;
        const unsigned run =
            i == 8 || i == 9 || i >= 16 ? RF_CONTROL_RUN : 0; /* seven from 13.1 on, then from 9.0 on */
        const unsigned trend = i >= 16 ? RF_CONTROL_TREND : 0;
        g_assert_cmpuint(signals[i] & ~(unsigned)RF_CONTROL_RANGE, ==, expected | run | trend);
    }
    const double jump[] = {10, 12, 8.2, 10};
    rf_control_chart_signals(&limits, jump, 4, signals);
    g_assert_cmpuint(signals[2], ==, RF_CONTROL_RANGE);
}

/* A point on the centre line belongs to neither side; equal points neither rise nor fall. */
static void ties_break_streaks(void)
{
    const RfControlLimits limits = {.centre = 0, .sigma = 1, .lower = -3, .upper = 3, .range_upper = 9};
    const double course[] = {1, 1, 1, 1, 1, 1, 0, 1, 1, 1, 1, 1, 1};
    unsigned signals[G_N_ELEMENTS(course)];
    rf_control_chart_signals(&limits, course, G_N_ELEMENTS(course), signals);
    for (size_t i = 0; i < G_N_ELEMENTS(course); i++) g_assert_cmpuint(signals[i], ==, 0);
}

static void too_few_or_all_alike_give_no_limits(void)
{
    const double alike[10] = {3, 3, 3, 3, 3, 3, 3, 3, 3, 3};
    RfControlLimits limits;
    g_assert_false(rf_control_chart_limits(FLOW, RF_CONTROL_CHART_BASELINE - 1, &limits));
    g_assert_false(rf_control_chart_limits(alike, 10, &limits));
}

static size_t first_signal(gsl_rng *random, double shift, unsigned which)
{
    enum { LONG = 4000 };
    const RfControlLimits limits = {
        .centre = 0, .sigma = 1, .lower = -3, .upper = 3, .range_upper = G_MAXDOUBLE};
    double course[LONG];
    unsigned signals[LONG];
    for (int i = 0; i < LONG; i++) course[i] = shift + gsl_ran_gaussian_ziggurat(random, 1);
    rf_control_chart_signals(&limits, course, LONG, signals);
    for (size_t i = 0; i < LONG; i++)
        if (signals[i] & which) return i + 1;
    return LONG;
}

/* Simulated charts against the theory, and the trend rule on top can only be sooner. */
static void run_lengths_simulated(void)
{
    enum { CHARTS = 3000 };
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, 7870);
    for (double shift = 0; shift < 3.5; shift += 0.5) {
        double sum = 0, squares = 0, sooner = 0;
        for (int i = 0; i < CHARTS; i++) {
            double length = (double)first_signal(random, shift, RF_CONTROL_BEYOND | RF_CONTROL_RUN);
            sum += length, squares += length * length;
            sooner +=
                (double)first_signal(random, shift, RF_CONTROL_BEYOND | RF_CONTROL_RUN | RF_CONTROL_TREND);
        }
        const double mean = sum / CHARTS, u = sqrt((squares / CHARTS - mean * mean) / CHARTS);
        const double theory = rf_control_chart_run_length(shift, true);
        g_test_message("shift %.1f sigma: %.2f(%.2f) points, theory %.2f, with trends %.2f", shift, mean, u,
                       theory, sooner / CHARTS);
        g_assert_cmpfloat(fabs(mean - theory), <, 4 * u);
        g_assert_cmpfloat(sooner / CHARTS, <, theory + 4 * u);
    }
    gsl_rng_free(random);
}

/* The instant: within the stated range in at least 90 of 100, unbiased in size. */
static void shift_is_dated(void)
{
    enum { CHARTS = 400, BEFORE = 30, AFTER = 25 };
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, 1998);
    const RfControlLimits limits = {
        .centre = 0, .sigma = 1, .lower = -3, .upper = 3, .range_upper = G_MAXDOUBLE};
    int inside = 0, exact = 0;
    double pulls = 0;
    for (int i = 0; i < CHARTS; i++) {
        double course[BEFORE + AFTER];
        for (int j = 0; j < BEFORE + AFTER; j++)
            course[j] = (j >= BEFORE ? 2.0 : 0) + gsl_ran_gaussian_ziggurat(random, 1);
        RfControlShift shift = rf_control_chart_shift(&limits, course, 0, BEFORE + AFTER - 1);
        inside += shift.from <= BEFORE && BEFORE <= shift.to;
        exact += shift.first == BEFORE;
        pulls += pow((shift.size - 2) / shift.u_size, 2);
    }
    gsl_rng_free(random);
    g_test_message("shift of 2 sigma: dated exactly %d, inside the range %d of %d; squared pull %.2f", exact,
                   inside, CHARTS, pulls / CHARTS);
    g_assert_cmpint(inside, >=, CHARTS * 90 / 100);
    g_assert_cmpint(exact, >=, CHARTS / 2);
    g_assert_cmpfloat_with_epsilon(pulls / CHARTS, 1, 0.3);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    gsl_set_error_handler_off();
    g_test_add_func("/control-chart/limits/published", limits_published);
    g_test_add_func("/control-chart/limits/constants", constants_published);
    g_test_add_func("/control-chart/limits/too-few", too_few_or_all_alike_give_no_limits);
    g_test_add_func("/control-chart/signals/hand-made", signals_of_hand_made_courses);
    g_test_add_func("/control-chart/signals/ties", ties_break_streaks);
    g_test_add_func("/control-chart/run-length/published", run_lengths_published);
    g_test_add_func("/control-chart/run-length/simulated", run_lengths_simulated);
    g_test_add_func("/control-chart/shift/dated", shift_is_dated);
    return g_test_run();
}
