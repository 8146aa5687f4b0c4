#include "tracker/frame_clock.h"

#include <glib.h>
#include <math.h>

#define FRAMES 300

static const RfRatio millisecond_s = {1, 1000}, ntsc_hz = {30000, 1001}, unknown = {0, 0};

/* ---- limits ---- */

static void test_single_frame(void)
{
    int64_t ticks[] = {4711};
    RfFrameClock clock = rf_frame_clock_fit(ticks, 1, millisecond_s, &ntsc_hz, 1);
    g_assert_false(clock.is_snapped);
    g_assert_cmpfloat(rf_frame_clock_time_s(&clock, 4711), ==, 0);
    g_assert_cmpfloat_with_epsilon(clock.mean_interval_s, 1001 / 30000.0, 1e-15);
    clock = rf_frame_clock_fit(ticks, 1, millisecond_s, &unknown, 1);
    g_assert_cmpfloat(clock.mean_interval_s, >, 0);
}

static void test_no_frame(void)
{
    RfFrameClock clock = rf_frame_clock_fit(NULL, 0, millisecond_s, &ntsc_hz, 1);
    g_assert_false(clock.is_snapped);
    g_assert_cmpfloat(clock.mean_interval_s, >, 0);
}

/* ---- the rate against the ticks ---- */

static void fill(int64_t *ticks, double rate_hz, double ticks_per_s, int left_out_from, int left_out)
{
    for (int k = 0; k < FRAMES; k++) {
        int n = k < left_out_from ? k : k + left_out;
        ticks[k] = 70 + llround(n / rate_hz * ticks_per_s);
    }
}

static void test_coarse_ticks(void)
{
    int64_t ticks[FRAMES];
    fill(ticks, 30000 / 1001.0, 1000, FRAMES, 0);
    RfRatio rates[] = {{25, 1}, ntsc_hz};
    RfFrameClock clock = rf_frame_clock_fit(ticks, FRAMES, millisecond_s, rates, 2);
    g_assert_true(clock.is_snapped);
    g_assert_true(clock.is_constant);
    g_assert_cmpint(clock.rate_hz.num, ==, 30000);
    for (int k = 0; k < FRAMES; k++) {
        g_assert_cmpfloat(rf_frame_clock_time_s(&clock, ticks[k]), ==, k * 1001.0 / 30000.0);
    }
}

static void test_gap(void)
{
    int64_t ticks[FRAMES];
    fill(ticks, 30000 / 1001.0, 1000, 20, 3);
    RfFrameClock clock = rf_frame_clock_fit(ticks, FRAMES, millisecond_s, &ntsc_hz, 1);
    g_assert_true(clock.is_snapped);
    g_assert_false(clock.is_constant);
    g_assert_cmpint(clock.gaps, ==, 1);
    g_assert_cmpfloat(rf_frame_clock_time_s(&clock, ticks[20]), ==, 23 * 1001.0 / 30000.0);
}

/* With ticks as coarse as that, nearly every timestamp is near some multiple: no evidence of a rate. */
static void test_gap_too_coarse(void)
{
    int64_t ticks[FRAMES];
    fill(ticks, 30000 / 1001.0, 100, 20, 3);
    RfFrameClock clock = rf_frame_clock_fit(ticks, FRAMES, (RfRatio){1, 100}, &ntsc_hz, 1);
    g_assert_false(clock.is_snapped);
}

static void test_wrong_rate(void)
{
    int64_t ticks[FRAMES];
    fill(ticks, 31, 1000, FRAMES, 0);
    RfFrameClock clock = rf_frame_clock_fit(ticks, FRAMES, millisecond_s, &ntsc_hz, 1);
    g_assert_false(clock.is_snapped);
    g_assert_cmpfloat_with_epsilon(clock.mean_interval_s, 1 / 31.0, 1e-5);
    g_assert_cmpfloat(rf_frame_clock_time_s(&clock, ticks[7]), ==, (double)(ticks[7] - ticks[0]) / 1000);
}

/* ---- one after the other ---- */

static RfFrameTimer timer_at_25_hz(double start_s)
{
    RfFrameClock clock = {.tick_s = millisecond_s, .mean_interval_s = 0.04};
    return rf_frame_timer_new(&clock, start_s);
}

static void test_timer(void)
{
    RfFrameTimer timer = timer_at_25_hz(2);
    g_assert_cmpfloat(rf_frame_timer_next(&timer, true, 500), ==, 2);
    g_assert_cmpfloat_with_epsilon(rf_frame_timer_next(&timer, true, 541), 2.041, 1e-12);
    g_assert_cmpfloat_with_epsilon(rf_frame_timer_next(&timer, false, 0), 2.081, 1e-12);
    g_assert_cmpfloat_with_epsilon(rf_frame_timer_next(&timer, false, 0), 2.121, 1e-12);
    g_assert_cmpfloat_with_epsilon(rf_frame_timer_next(&timer, true, 660), 2.160, 1e-12);
    g_assert_cmpint(timer.missing, ==, 2);
    g_assert_cmpint(timer.backwards, ==, 0);
}

static void test_timer_goes_back(void)
{
    RfFrameTimer timer = timer_at_25_hz(0);
    rf_frame_timer_next(&timer, true, 9000);
    g_assert_cmpfloat_with_epsilon(rf_frame_timer_next(&timer, true, 100), 0.04,
                                   1e-12); /* the clock was set */
    g_assert_cmpfloat_with_epsilon(rf_frame_timer_next(&timer, true, 140), 0.08, 1e-12);
    g_assert_cmpint(timer.backwards, ==, 1);
}

static void test_timer_leaps(void)
{
    RfFrameTimer timer = timer_at_25_hz(0);
    rf_frame_timer_next(&timer, true, 0);
    double time_s = rf_frame_timer_next(&timer, true, INT64_MAX);
    g_assert_cmpfloat_with_epsilon(time_s, 0.04, 1e-9);
    g_assert_cmpint(timer.backwards, ==, 1);
    for (int64_t k = 0; k < 50; k++) { /* whatever comes, times ascend */
        double next_s = rf_frame_timer_next(&timer, true, k % 2 == 0 ? INT64_MIN + 1 : INT64_MAX - k);
        g_assert_cmpfloat(next_s, >, time_s);
        time_s = next_s;
    }
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/frame-clock/fit/single-frame", test_single_frame);
    g_test_add_func("/frame-clock/fit/no-frame", test_no_frame);
    g_test_add_func("/frame-clock/fit/rate-beats-coarse-ticks", test_coarse_ticks);
    g_test_add_func("/frame-clock/fit/gap", test_gap);
    g_test_add_func("/frame-clock/fit/gap-too-coarse-to-tell", test_gap_too_coarse);
    g_test_add_func("/frame-clock/fit/wrong-rate-leaves-timestamps", test_wrong_rate);
    g_test_add_func("/frame-clock/timer/missing", test_timer);
    g_test_add_func("/frame-clock/timer/goes-back", test_timer_goes_back);
    g_test_add_func("/frame-clock/timer/leaps", test_timer_leaps);
    return g_test_run();
}
