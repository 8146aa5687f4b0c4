#include "cli/review_place.h"

#include <string.h>

#include "tests/support/straight_paths.h"

static unsigned find(const GArray *rows, double time_s, double x_px, double y_px, char **why)
{
    const RfReviewPlace place = {1, time_s, x_px, y_px};
    *why = NULL;
    return rf_review_place_find(rows, &place, why);
}

/* The number in the entry is another one's by now; the place isn't. */
static void by_place_not_by_number(void)
{
    g_autoptr(GArray) rows = straight_paths_new();
    straight_paths_add(rows, 1, 0, 5, 10, 10, 20);
    straight_paths_add(rows, 7, 2, 8, 10, 100, 20);
    g_autofree char *why = NULL;
    g_assert_cmpuint(find(rows, 4, 50.4, 99.2, &why), ==, 7);
    g_assert_null(why);
}

static void nobody_there(void)
{
    g_autoptr(GArray) rows = straight_paths_new();
    straight_paths_add(rows, 1, 0, 5, 10, 10, 20);
    g_autofree char *late = NULL, *far = NULL;
    g_assert_cmpuint(find(rows, 5.2, 114, 10, &late), ==, 0); /* on its way, but 0.2 s after its end */
    g_assert_cmpuint(find(rows, 2, 50, 13.5, &far), ==, 0);
    g_assert_cmpstr(far, ==, "no droplet was within 3 px of x = 50.0, y = 13.5 px at 2.00 s");
    g_assert_nonnull(late);
}

static void two_there_are_one_too_many(void)
{
    g_autoptr(GArray) rows = straight_paths_new();
    straight_paths_add(rows, 3, 0, 5, 10, 10, 20);
    straight_paths_add(rows, 4, 0, 5, 10, 12, 20);
    g_autofree char *why = NULL;
    g_assert_cmpuint(find(rows, 2, 50, 10.1, &why), ==, 0);
    g_assert_cmpstr(why, ==, "droplets 3 and 4 were both within 3 px of x = 50.0, y = 10.1 px at 2.00 s");
}

/* Right at a cut both parts are within reach, but only one at that very instant. */
static void nearest_in_time_across_a_cut(void)
{
    g_autoptr(GArray) rows = straight_paths_new();
    straight_paths_add(rows, 1, 0, 2, 10, 10, 20);
    straight_paths_add(rows, 2, 2 + 1 / 30.0, 4, 50 + 20 / 30.0, 10, 20);
    g_autofree char *before = NULL, *after = NULL;
    g_assert_cmpuint(find(rows, 2, 50, 10, &before), ==, 1);
    g_assert_cmpuint(find(rows, 2 + 1 / 30.0, 50 + 20 / 30.0, 10, &after), ==, 2);
}

/* Two that meet and part: each is named by a place far from the meeting. */
static void sightings_keep_clear_of_others(void)
{
    g_autoptr(GArray) rows = straight_paths_new();
    straight_paths_add(rows, 1, 0, 10, 0, 50, 20);
    straight_paths_add(rows, 2, 0, 10, 200, 51, -20); /* they meet in the middle, at 5 s */
    straight_paths_add(rows, 3, 20, 21, 0, 50, 20);
    g_autoptr(GArray) sightings = rf_review_place_sightings(rows);
    g_assert_cmpuint(sightings->len, ==, 3);
    for (guint i = 0; i < 3; i++) {
        const RfReviewSighting *one = &g_array_index(sightings, RfReviewSighting, i);
        g_autofree char *why = NULL;
        g_assert_cmpuint(one->place.droplet, ==, i + 1);
        g_assert_cmpuint(rf_review_place_find(rows, &one->place, &why), ==, i + 1);
        g_assert_true(i == 2 || one->place.time_s < 4.7 ||
                      one->place.time_s > 5.3); /* 12 px apart and more */
    }
    const RfReviewSighting *last = &g_array_index(sightings, RfReviewSighting, 2);
    g_assert_cmpfloat_with_epsilon(last->start_s, 20, 1e-9);
    g_assert_cmpfloat_with_epsilon(last->end_s, 21, 1e-9);
    g_assert_cmpfloat_with_epsilon(last->place.time_s, 20.5, 0.05); /* alone: the middle serves best */
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/review-place/find/by-place-not-by-number", by_place_not_by_number);
    g_test_add_func("/review-place/find/nobody", nobody_there);
    g_test_add_func("/review-place/find/two", two_there_are_one_too_many);
    g_test_add_func("/review-place/find/across-a-cut", nearest_in_time_across_a_cut);
    g_test_add_func("/review-place/sightings/clear-of-others", sightings_keep_clear_of_others);
    return g_test_run();
}
