#include "tests/support/track_score.h"

#include <stdbool.h>

/* Hand-made cases, each worked out on paper from the definitions of N. Chenouard et al., Nature Methods 11 (2014) 281. */

static void add_track(GPtrArray *tracks, int first, int last, double x_px, double y_px)
{
    GArray *track = g_array_new(false, false, sizeof(RfScorePoint));
    for (int frame = first; frame <= last; frame++) {
        RfScorePoint point = {frame, x_px, y_px};
        g_array_append_val(track, point);
    }
    g_ptr_array_add(tracks, track);
}

static GPtrArray *new_tracks(void)
{
    return g_ptr_array_new_with_free_func((GDestroyNotify)g_array_unref);
}

/* Case A: one true track of 10 frames at rest; found in frames 1 to 8, 3 px beside it; gate 5 px. */
static void test_case_a(void)
{
    g_autoptr(GPtrArray) truth = new_tracks(), found = new_tracks();
    add_track(truth, 0, 9, 0, 0);
    add_track(found, 1, 8, 3, 0);
    RfTrackScore score = rf_track_score(truth, found, 10, 5);
    g_assert_cmpfloat_with_epsilon(score.alpha, 0.32, 1e-12);
    g_assert_cmpfloat_with_epsilon(score.beta, 0.32, 1e-12);
    g_assert_cmpfloat_with_epsilon(score.jsc, 0.8, 1e-12);
    g_assert_cmpfloat_with_epsilon(score.jsc_theta, 1, 1e-12);
    g_assert_cmpfloat_with_epsilon(score.rmse_px, 3, 1e-12);
}

/* Case B: A and a spurious track of 4 frames. */
static void test_case_b(void)
{
    g_autoptr(GPtrArray) truth = new_tracks(), found = new_tracks();
    add_track(truth, 0, 9, 0, 0);
    add_track(found, 1, 8, 3, 0);
    add_track(found, 2, 5, 100, 100);
    RfTrackScore score = rf_track_score(truth, found, 10, 5);
    g_assert_cmpfloat_with_epsilon(score.alpha, 0.32, 1e-12);
    g_assert_cmpfloat_with_epsilon(score.beta, 0.228571, 5e-7);
    g_assert_cmpfloat_with_epsilon(score.jsc, 0.571429, 5e-7);
    g_assert_cmpfloat_with_epsilon(score.jsc_theta, 0.5, 1e-12);
    g_assert_cmpfloat_with_epsilon(score.rmse_px, 3, 1e-12);
}

/* Case C: perfect positions, one identity in frames 1 to 6 and another in 7 to 10: accuracy 0.9 = 1 - switches / 10. */
static void test_case_c(void)
{
    g_autoptr(GPtrArray) truth = new_tracks(), found = new_tracks();
    add_track(truth, 1, 10, 0, 0);
    add_track(found, 1, 6, 0, 0);
    add_track(found, 7, 10, 0, 0);
    RfTrackScore score = rf_track_score(truth, found, 11, 5);
    g_assert_cmpfloat_with_epsilon(1 - score.identity_switches / 10.0, 0.9, 1e-12);
}

static void test_perfect(void)
{
    g_autoptr(GPtrArray) truth = new_tracks(), found = new_tracks();
    add_track(truth, 0, 9, 0, 0);
    add_track(truth, 3, 7, 50, 0);
    add_track(found, 3, 7, 50, 0);
    add_track(found, 0, 9, 0, 0);
    RfTrackScore score = rf_track_score(truth, found, 10, 5);
    g_assert_cmpfloat(score.jsc, ==, 1);
    g_assert_cmpfloat(score.jsc_theta, ==, 1);
    g_assert_cmpfloat(score.beta, ==, 1);
    g_assert_cmpint(score.identity_switches, ==, 0);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/track_score/perfect", test_perfect);
    g_test_add_func("/track_score/partly-found", test_case_a);
    g_test_add_func("/track_score/spurious", test_case_b);
    g_test_add_func("/track_score/switch", test_case_c);
    return g_test_run();
}
