#include "cli/line_crossings.h"

#include <math.h>

static const double step_mm = 0.1, rate_hz = 25;

static RfResults *bench(void)
{
    RfResults *results = rf_results_new();
    results->scale = (RfScaleRow){.found = true,
                                  .px_per_mm_x = 500,
                                  .px_per_mm_y = 500,
                                  .has_lines = true,
                                  .line_offset_mm = 0.03,
                                  .line_step_mm = step_mm};
    return results;
}

static void add_row(RfResults *results, unsigned droplet, double time_s, double level)
{
    RfPathRow row = {.droplet = droplet,
                     .frame = llround(time_s * rate_hz),
                     .seen = true,
                     .time_s = time_s,
                     .y_mm = results->scale.line_offset_mm + level * step_mm,
                     .u_y_mm = 1e-4};
    g_array_append_val(results->paths, row);
}

/* level = a + b t for `span_s`. */
static void add_straight(RfResults *results, unsigned droplet, double from, double per_s, double span_s)
{
    for (int i = 0; i <= (int)(span_s * rate_hz); i++)
        add_row(results, droplet, i / rate_hz, from + per_s * i / rate_hz);
}

static GArray *passages(const RfResults *results, double divisions, bool is_rise)
{
    g_autoptr(RfLineCrossings) crossings = rf_line_crossings_new(results);
    g_assert_nonnull(crossings);
    return rf_line_crossings_passages(crossings, divisions, is_rise);
}

static const RfPassage *at(const GArray *found, guint i)
{
    g_assert_cmpuint(i, <, found->len);
    return &g_array_index(found, RfPassage, i);
}

static void straight_fall_is_exact(void)
{
    g_autoptr(RfResults) results = bench();
    add_straight(results, 4, 0.55, 0.37, 10); /* to 4.25: crosses 1, 2, 3, 4 */
    g_autoptr(GArray) one = passages(results, 1, false), three = passages(results, 3, false);
    g_autoptr(GArray) up = passages(results, 1, true), part = passages(results, 1.5, false);
    g_assert_cmpuint(one->len, ==, 3);
    for (guint i = 0; i < 3; i++) {
        g_assert_cmpuint(at(one, i)->droplet, ==, 4);
        g_assert_cmpint(at(one, i)->line, ==, (int)i + 1);
        g_assert_cmpfloat_with_epsilon(at(one, i)->start_s, (i + 1 - 0.55) / 0.37, 1e-9);
        g_assert_cmpfloat_with_epsilon(at(one, i)->end_s - at(one, i)->start_s, 1 / 0.37, 1e-9);
        g_assert_true(at(one, i)->is_first);
    }
    g_assert_cmpuint(three->len, ==, 1);
    g_assert_cmpfloat_with_epsilon(at(three, 0)->end_s - at(three, 0)->start_s, 3 / 0.37, 1e-9);
    g_assert_cmpuint(up->len, ==, 0);
    g_assert_cmpfloat_with_epsilon(at(part, 0)->end_s - at(part, 0)->start_s, 1.5 / 0.37, 1e-9);
}

static void rise_counts_the_other_way(void)
{
    g_autoptr(RfResults) results = bench();
    add_straight(results, 1, 3.2, -0.5, 5); /* 3.2 to 0.7 */
    g_autoptr(GArray) two = passages(results, 2, true);
    g_assert_cmpuint(two->len, ==, 1);
    g_assert_cmpint(at(two, 0)->line, ==, 3);
    g_assert_cmpfloat_with_epsilon(at(two, 0)->start_s, 0.4, 1e-9);
    g_assert_cmpfloat_with_epsilon(at(two, 0)->end_s, 4.4, 1e-9);
}

static void localisation_over_speed(void)
{
    g_autoptr(RfResults) results = bench();
    add_straight(results, 1, 0.5, 0.5, 6);
    g_autoptr(GArray) one = passages(results, 1, false);
    /* 1e-4 mm at either end over 0.05 mm/s; a straight path has no Brownian part */
    g_assert_cmpfloat_with_epsilon(at(one, 0)->sigma_s, sqrt(2) * 1e-4 / 0.05, 1e-6);
}

/* Over the line, back, and over it again: the first passage is where it was first reached; crossings again are told apart. */
static void first_passage_of_a_path_that_dithers(void)
{
    static const double levels[] = {0.5, 0.9, 1.1, 0.95, 1.05, 1.4, 1.9, 2.1, 1.9, 2.2, 2.6};
    g_autoptr(RfResults) results = bench();
    for (guint i = 0; i < G_N_ELEMENTS(levels); i++) add_row(results, 1, i / rate_hz, levels[i]);
    g_autoptr(GArray) one = passages(results, 1, false);
    g_assert_cmpuint(one->len, ==, 2);
    g_assert_true(at(one, 0)->is_first);
    g_assert_false(at(one, 1)->is_first);
    g_assert_cmpfloat_with_epsilon(at(one, 0)->start_s, 1.5 / rate_hz, 1e-9);
    g_assert_cmpfloat_with_epsilon(at(one, 0)->end_s, 6.5 / rate_hz, 1e-9);
    g_assert_cmpfloat_with_epsilon(at(one, 1)->end_s, 6.5 / rate_hz, 1e-9);
}

static void switches_and_field(void)
{
    g_autoptr(RfResults) results = bench();
    add_straight(results, 1, 0.5, 0.5, 8); /* crosses 1 at 1 s, 2 at 3 s, 3 at 5 s, 4 at 7 s */
    RfSwitchRow on = {.number = 1, .time_s = {4, 0.005}, .from = RF_FIELD_OFF, .to = RF_FIELD_TOP_MINUS};
    g_array_append_val(results->switches, on);
    g_autoptr(GArray) one = passages(results, 1, false);
    g_assert_cmpuint(at(one, 0)->switches, ==, 0);
    g_assert_cmpuint(at(one, 1)->switches, ==, 1);
    g_assert_cmpfloat_with_epsilon(at(one, 1)->switch_s, 4, 1e-12);
    g_assert_cmpuint(at(one, 2)->switches, ==, 0);
    g_assert_cmpfloat_with_epsilon(at(one, 0)->voltage_sign, 0, 1e-12);
    g_assert_cmpfloat_with_epsilon(at(one, 2)->voltage_sign, -1, 1e-12);
}

static void lines_that_lean(void)
{
    g_autoptr(RfResults) results = bench();
    results->scale.line_slope = 0.5;
    for (int i = 0; i <= 100; i++) {
        double t = i / rate_hz;
        add_row(results, 1, t, 0.25);
        g_array_index(results->paths, RfPathRow, (guint)i).x_mm =
            -0.1 * t; /* crosswise only: 0.5 level per second */
    }
    g_autoptr(GArray) one = passages(results, 1, false);
    g_assert_cmpfloat_with_epsilon(at(one, 0)->start_s, 1.5, 1e-9);
    g_assert_cmpfloat_with_epsilon(at(one, 0)->end_s, 3.5, 1e-9);
}

static void not_across_a_gap_and_not_between_droplets(void)
{
    g_autoptr(RfResults) results = bench();
    add_row(results, 1, 0, 0.5);
    add_row(results, 1, 0.04, 0.9);
    add_row(results, 1, 2, 2.1);
    add_row(results, 2, 0, 0.9);
    add_row(results, 3, 0.04, 2.5);
    g_autoptr(GArray) one = passages(results, 1, false);
    g_assert_cmpuint(one->len, ==, 0);
}

static void broken_paths_end(void)
{
    g_autoptr(RfResults) results = bench();
    add_row(results, 1, 0, 0);
    add_row(results, 1, 0.04, 1e18);
    add_row(results, 1, 0.08, -1e300);
    g_autoptr(GArray) one = passages(results, 1, false);
    g_assert_cmpuint(one->len, ==, 0);
}

static void none_without_lines(void)
{
    g_autoptr(RfResults) results = bench();
    results->scale.has_lines = false;
    g_assert_null(rf_line_crossings_new(results));
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/line_crossings/passages/straight-fall-is-exact", straight_fall_is_exact);
    g_test_add_func("/line_crossings/passages/rise-counts-the-other-way", rise_counts_the_other_way);
    g_test_add_func("/line_crossings/passages/localisation-over-speed", localisation_over_speed);
    g_test_add_func("/line_crossings/passages/first-passage-of-a-path-that-dithers",
                    first_passage_of_a_path_that_dithers);
    g_test_add_func("/line_crossings/passages/switches-and-field", switches_and_field);
    g_test_add_func("/line_crossings/passages/lines-that-lean", lines_that_lean);
    g_test_add_func("/line_crossings/passages/not-across-a-gap-and-not-between-droplets",
                    not_across_a_gap_and_not_between_droplets);
    g_test_add_func("/line_crossings/passages/broken-paths-end", broken_paths_end);
    g_test_add_func("/line_crossings/new/none-without-lines", none_without_lines);
    return g_test_run();
}
