#include "cli/review_paths.h"

#include <string.h>

#include "tests/support/straight_paths.h"

static void add_entry(RfResults *results, RfReviewRow entry)
{
    entry.reason = g_strdup("why");
    entry.name = g_strdup("who");
    entry.date = g_strdup("");
    entry.detail = g_strdup("");
    g_array_append_val(results->review, entry);
}

static const RfReviewRow *entry(const RfResults *results, guint i)
{
    return &g_array_index(results->review, RfReviewRow, i);
}

/* "1:0-59 4:60-100": droplets with their first and last frames, in the order of the rows. */
static char *outline(const GArray *rows)
{
    GString *text = g_string_new(NULL);
    for (guint i = 0; i < rows->len; i++) {
        const RfPathRow *row = &g_array_index(rows, RfPathRow, i), *next = row + 1;
        if (i == 0 || (row - 1)->droplet != row->droplet)
            g_string_append_printf(text, "%s%u:%d-", i ? " " : "", row->droplet, (int)row->frame);
        if (i + 1 == rows->len || next->droplet != row->droplet)
            g_string_append_printf(text, "%d", (int)row->frame);
        else
            g_assert_cmpint(next->frame, >, row->frame);
    }
    return g_string_free(text, FALSE);
}

/* 1 for 10 s, 2 meanwhile; 3 begins half a second after 1 has gone. */
static GArray *three(void)
{
    GArray *rows = straight_paths_new();
    straight_paths_add(rows, 1, 0, 10, 0, 50, 20);
    straight_paths_add(rows, 2, 1, 5, 0, 150, 20);
    straight_paths_add(rows, 3, 10.5, 15, 210, 50, 20);
    return rows;
}

static const RfReviewPlace in_1 = {1, 5, 100, 50}, in_2 = {2, 3, 40, 150}, in_3 = {3, 12.5, 250, 50},
                           nowhere = {9, 3, 300, 300};

static char *reviewed(RfResults *results, GArray *rows)
{
    g_autofree char *before = outline(rows);
    g_autoptr(GArray) paths = rf_review_paths_apply(rows, results->review);
    g_autofree char *after = outline(rows);
    g_assert_cmpstr(before, ==, after); /* the paths as they were followed stay */
    return outline(paths);
}

static void cut_in_two(void)
{
    g_autoptr(RfResults) results = rf_results_new();
    g_autoptr(GArray) rows = three();
    add_entry(results, (RfReviewRow){.action = RF_REVIEW_CUT, .place = in_1, .cut_s = 6});
    g_autofree char *paths = reviewed(results, rows);
    g_assert_cmpstr(paths, ==, "1:0-179 2:30-150 3:315-450 4:180-300");
    g_assert_cmpint(entry(results, 0)->outcome, ==, RF_REVIEW_HONOURED);
    g_assert_cmpuint(entry(results, 0)->now, ==, 1);
    g_assert_cmpuint(entry(results, 0)->other_now, ==, 4);
    g_assert_cmpuint(entry(results, 0)->found, ==, 1);
    g_assert_cmpstr(entry(results, 0)->detail, ==,
                    "droplet 1 was cut at 6.00 s; from then on it is droplet 4");
}

/* What was only bridged around the cut belongs to neither part. */
static void bridges_at_the_cut_go(void)
{
    g_autoptr(RfResults) results = rf_results_new();
    g_autoptr(GArray) rows = three();
    for (guint frame = 170; frame < 190; frame++) g_array_index(rows, RfPathRow, frame).seen = false;
    add_entry(results, (RfReviewRow){.action = RF_REVIEW_CUT, .place = in_1, .cut_s = 6});
    g_autofree char *paths = reviewed(results, rows);
    g_assert_cmpstr(paths, ==, "1:0-169 2:30-150 3:315-450 4:190-300");
}

static void join_across_a_gap(void)
{
    g_autoptr(RfResults) results = rf_results_new();
    g_autoptr(GArray) rows = three();
    add_entry(results, (RfReviewRow){.action = RF_REVIEW_JOIN, .place = in_3, .other = in_1});
    g_autofree char *paths = reviewed(results, rows);
    g_assert_cmpstr(paths, ==, "1:0-450 2:30-150");
    g_assert_cmpuint(entry(results, 0)->now, ==, 1);
    g_assert_cmpuint(entry(results, 0)->found, ==, 3);
    g_assert_cmpuint(entry(results, 0)->other_found, ==, 1);
    g_assert_cmpstr(entry(results, 0)->detail, ==,
                    "droplets 1 and 3 were joined to droplet 1 across 0.50 s and 10.0 px");
}

static void two_at_once_are_not_one(void)
{
    g_autoptr(RfResults) results = rf_results_new();
    g_autoptr(GArray) rows = three();
    add_entry(results, (RfReviewRow){.action = RF_REVIEW_JOIN, .place = in_1, .other = in_2});
    g_autofree char *paths = reviewed(results, rows);
    g_assert_cmpstr(paths, ==, "1:0-300 2:30-150 3:315-450");
    g_assert_cmpint(entry(results, 0)->outcome, ==, RF_REVIEW_NOT_POSSIBLE);
    g_assert_nonnull(strstr(entry(results, 0)->detail, "in view at the same time"));
}

static void nothing_to_cut(void)
{
    const double times_s[] = {0, 10.1, 4000};
    for (size_t i = 0; i < G_N_ELEMENTS(times_s); i++) {
        g_autoptr(RfResults) results = rf_results_new();
        g_autoptr(GArray) rows = three();
        add_entry(results, (RfReviewRow){.action = RF_REVIEW_CUT, .place = in_1, .cut_s = times_s[i]});
        g_autofree char *paths = reviewed(results, rows);
        g_assert_cmpstr(paths, ==, "1:0-300 2:30-150 3:315-450");
        g_assert_cmpint(entry(results, 0)->outcome, ==, RF_REVIEW_NOT_POSSIBLE);
        g_assert_true(g_str_has_prefix(entry(results, 0)->detail, "droplet 1 is seen from 0.00 to 10.00 s"));
    }
}

static void not_found_changes_nothing(void)
{
    g_autoptr(RfResults) results = rf_results_new();
    g_autoptr(GArray) rows = three();
    add_entry(results, (RfReviewRow){.action = RF_REVIEW_CUT, .place = nowhere, .cut_s = 6});
    add_entry(results, (RfReviewRow){.action = RF_REVIEW_JOIN, .place = in_1, .other = nowhere});
    g_autofree char *paths = reviewed(results, rows);
    g_assert_cmpstr(paths, ==, "1:0-300 2:30-150 3:315-450");
    for (guint i = 0; i < 2; i++) {
        g_assert_cmpint(entry(results, i)->outcome, ==, RF_REVIEW_NOT_FOUND);
        g_assert_nonnull(strstr(entry(results, i)->detail, "no droplet was within 3 px"));
    }
}

/* Two that were taken for one another: both cut where they met, and joined crosswise. */
static void exchanged_and_put_right(void)
{
    g_autoptr(RfResults) results = rf_results_new();
    g_autoptr(GArray) rows = straight_paths_new();
    straight_paths_add(rows, 1, 0, 10, 0, 50, 20);
    straight_paths_add(rows, 2, 0, 10, 0, 150, 20);
    const RfReviewPlace early_1 = {1, 2, 40, 50}, late_1 = {1, 8, 160, 50}, early_2 = {2, 2, 40, 150},
                        late_2 = {2, 8, 160, 150};
    add_entry(results, (RfReviewRow){.action = RF_REVIEW_CUT, .place = early_1, .cut_s = 5});
    add_entry(results, (RfReviewRow){.action = RF_REVIEW_CUT, .place = early_2, .cut_s = 5});
    add_entry(results, (RfReviewRow){.action = RF_REVIEW_JOIN, .place = early_1, .other = late_2});
    add_entry(results, (RfReviewRow){.action = RF_REVIEW_JOIN, .place = early_2, .other = late_1});
    g_autoptr(GArray) paths = rf_review_paths_apply(rows, results->review);
    g_autofree char *shape = outline(paths);
    g_assert_cmpstr(shape, ==, "1:0-300 2:0-300");
    g_assert_cmpfloat(g_array_index(paths, RfPathRow, 149).y_px, <, 51);
    g_assert_cmpfloat(g_array_index(paths, RfPathRow, 150).y_px, >, 149);
    for (guint i = 0; i < 4; i++) g_assert_cmpint(entry(results, i)->outcome, ==, RF_REVIEW_HONOURED);
}

static void one_already(void)
{
    g_autoptr(RfResults) results = rf_results_new();
    g_autoptr(GArray) rows = three();
    const RfReviewPlace late = {4, 9, 180, 50};
    add_entry(results, (RfReviewRow){.action = RF_REVIEW_JOIN, .place = in_1, .other = late});
    g_autofree char *paths = reviewed(results, rows);
    g_assert_nonnull(paths);
    g_assert_cmpint(entry(results, 0)->outcome, ==, RF_REVIEW_ALREADY);
}

/* Verdicts leave the paths alone, down to the array itself; but they too are told which droplet they point at. */
static void verdicts_leave_paths(void)
{
    g_autoptr(RfResults) results = rf_results_new();
    g_autoptr(GArray) rows = three();
    add_entry(results, (RfReviewRow){.action = RF_REVIEW_SET_ASIDE, .place = in_2});
    g_autoptr(GArray) paths = rf_review_paths_apply(rows, results->review);
    g_assert_true(paths == rows);
    g_assert_cmpuint(entry(results, 0)->found, ==, 2);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/review-paths/cut/in-two", cut_in_two);
    g_test_add_func("/review-paths/cut/bridges-go", bridges_at_the_cut_go);
    g_test_add_func("/review-paths/cut/nothing-there", nothing_to_cut);
    g_test_add_func("/review-paths/join/across-a-gap", join_across_a_gap);
    g_test_add_func("/review-paths/join/two-at-once", two_at_once_are_not_one);
    g_test_add_func("/review-paths/join/one-already", one_already);
    g_test_add_func("/review-paths/both/exchanged-and-put-right", exchanged_and_put_right);
    g_test_add_func("/review-paths/not-found", not_found_changes_nothing);
    g_test_add_func("/review-paths/verdicts-leave-paths", verdicts_leave_paths);
    return g_test_run();
}
