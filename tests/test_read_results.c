#include "cli/read_results.h"

#include "cli/folder_tree.h"
#include "cli/write_results.h"
#include "tests/support/sample_results.h"

#include <glib/gstdio.h>
#include <math.h>
#include <string.h>

static char *write_sample(const char *root)
{
    g_autoptr(RfResults) results = sample_results_new();
    results->scale.has_lines = true;
    results->scale.line_offset_mm = 0.02;
    results->scale.line_step_mm = 0.1;
    results->scale.line_slope = -0.003;
    char *target = g_build_filename(root, "out", NULL);
    g_autoptr(RfResultFolder) folder = rf_result_folder_open(target, NULL);
    g_assert_true(rf_write_results(results, folder, RF_WRITE_RESULTS_ALL, NULL));
    g_assert_true(rf_result_folder_commit(folder, NULL));
    return target;
}

static void what_was_written(void)
{
    g_autofree char *root = g_dir_make_tmp("risefall-read-XXXXXX", NULL);
    g_autofree char *folder = write_sample(root);
    g_autoptr(RfResults) expected = sample_results_new();
    RfMedium medium;
    bool has_medium;
    g_autoptr(GError) error = NULL;
    g_autoptr(RfResults) results = rf_read_results(folder, &medium, &has_medium, &error);
    g_assert_no_error(error);
    g_assert_cmpuint(results->paths->len, ==, expected->paths->len);
    g_assert_cmpuint(results->droplets->len, ==, expected->droplets->len);
    g_assert_cmpuint(results->switches->len, ==, expected->switches->len);
    for (guint i = 0; i < expected->switches->len; i++) {
        const RfSwitchRow *a = &g_array_index(results->switches, RfSwitchRow, i);
        const RfSwitchRow *b = &g_array_index(expected->switches, RfSwitchRow, i);
        g_assert_cmpfloat_with_epsilon(a->time_s.value, b->time_s.value, 1e-6);
        g_assert_cmpint((int)a->from, ==, (int)b->from);
        g_assert_cmpint((int)a->to, ==, (int)b->to);
    }
    g_assert_true(results->scale.has_lines);
    g_assert_cmpfloat_with_epsilon(results->scale.line_slope, -0.003, 1e-12);
    g_assert_cmpfloat_with_epsilon(results->gravity_axis_deg, 0.7, 1e-12);
    rf_folder_tree_remove(root);
}

static void missing_tables(void)
{
    g_autofree char *root = g_dir_make_tmp("risefall-read-XXXXXX", NULL);
    g_autofree char *folder = write_sample(root);
    g_autofree char *droplets = g_build_filename(folder, "droplets.csv", NULL);
    g_autofree char *summary = g_build_filename(folder, "summary.json", NULL);
    g_autofree char *switches = g_build_filename(folder, "switches.csv", NULL);
    g_unlink(droplets);
    g_unlink(summary);
    RfMedium medium;
    bool has_medium = true;
    g_autoptr(GError) error = NULL;
    g_autoptr(RfResults) results = rf_read_results(folder, &medium, &has_medium, &error);
    g_assert_no_error(error);
    g_assert_false(has_medium);
    g_assert_cmpuint(results->warnings->len, ==, 2);
    g_unlink(switches);
    g_assert_null(rf_read_results(folder, &medium, &has_medium, &error));
    g_assert_nonnull(strstr(error->message, "switches.csv"));
    rf_folder_tree_remove(root);
}

/* What json-glib would take for a mistake of ours. */
static void a_scale_of_another_kind(void)
{
    static const char *const broken[] = {"[]",
                                         "{\"px_per_mm_y\":\"400\"}",
                                         "{\"line_step_mm\":[0.1]}",
                                         "{\"px_per_mm_x\":1e999}",
                                         "{\"px_per_mm_x\":",
                                         ""};
    g_autofree char *root = g_dir_make_tmp("risefall-read-XXXXXX", NULL);
    g_autofree char *folder = write_sample(root);
    g_autofree char *scale = g_build_filename(folder, "scale.json", NULL);
    for (size_t i = 0; i < G_N_ELEMENTS(broken); i++) {
        RfMedium medium;
        bool has_medium;
        g_autoptr(GError) error = NULL;
        g_assert_true(g_file_set_contents(scale, broken[i], -1, NULL));
        g_assert_null(rf_read_results(folder, &medium, &has_medium, &error));
        g_assert_true(g_str_has_prefix(error->message, scale));
    }
    rf_folder_tree_remove(root);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/read_results/folder/what-was-written", what_was_written);
    g_test_add_func("/read_results/folder/missing-tables", missing_tables);
    g_test_add_func("/read_results/folder/a-scale-of-another-kind", a_scale_of_another_kind);
    return g_test_run();
}
