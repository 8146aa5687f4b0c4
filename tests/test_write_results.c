#include "cli/write_results.h"

#include <string.h>

#include "cli/folder_tree.h"
#include "tests/support/sample_results.h"

static char *write_whole(const char *root, const char *name, RfWriteResultsPart part)
{
    char *target = g_build_filename(root, name, NULL);
    g_autoptr(RfResults) results = sample_results_new();
    g_autoptr(GError) error = NULL;
    g_autoptr(RfResultFolder) folder = rf_result_folder_open(target, &error);
    g_assert_no_error(error);
    g_assert_true(rf_write_results(results, folder, part, &error));
    g_assert_true(rf_result_folder_commit(folder, &error));
    g_assert_no_error(error);
    return target;
}

static char *content(const char *folder, const char *name)
{
    g_autofree char *path = g_build_filename(folder, name, NULL);
    char *text = NULL;
    g_assert_true(g_file_get_contents(path, &text, NULL, NULL));
    return text;
}

static void every_file(void)
{
    g_autofree char *root = g_dir_make_tmp("risefall-write-XXXXXX", NULL);
    g_autofree char *folder = write_whole(root, "out", RF_WRITE_RESULTS_ALL);
    const char *const names[] = {"paths.csv",    "segments.csv", "switches.csv", "steps.csv",
                                 "droplets.csv", "audit.csv",    "budget.csv",   "scale.json",
                                 "summary.json", "audit.json",   "report.html",  "figures/charges.gp"};
    for (size_t i = 0; i < G_N_ELEMENTS(names); i++) {
        g_autofree char *text = content(folder, names[i]);
        g_assert_cmpuint(strlen(text), >, 60);
    }
    rf_folder_tree_remove(root);
}

static void paths_only(void)
{
    g_autofree char *root = g_dir_make_tmp("risefall-write-XXXXXX", NULL);
    g_autofree char *folder = write_whole(root, "out", RF_WRITE_RESULTS_PATHS);
    g_autoptr(GPtrArray) files = rf_folder_tree_files(folder);
    g_assert_cmpuint(files->len, ==, 4); /* with the list of what is ours */
    rf_folder_tree_remove(root);
}

static void same_results_same_bytes(void)
{
    g_autofree char *root = g_dir_make_tmp("risefall-write-XXXXXX", NULL);
    g_autofree char *one = write_whole(root, "one", RF_WRITE_RESULTS_ALL);
    g_autofree char *other = write_whole(root, "other", RF_WRITE_RESULTS_ALL);
    g_autoptr(GPtrArray) files = rf_folder_tree_files(one);
    for (guint i = 0; i < files->len; i++) {
        const char *name = files->pdata[i];
        if (g_str_has_suffix(name, ".pdf")) continue; /* another program's file; dates itself */
        g_autofree char *first = content(one, name), *second = content(other, name);
        g_assert_cmpstr(first, ==, second);
    }
    rf_folder_tree_remove(root);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/write_results/all/every-file", every_file);
    g_test_add_func("/write_results/paths/only-paths", paths_only);
    g_test_add_func("/write_results/all/same-results-same-bytes", same_results_same_bytes);
    return g_test_run();
}
