/* Writes the invented results as a whole result folder: for tests that need a real page, and for looking at it.
 *   write_sample_report FOLDER */
#include <stdio.h>

#include "cli/write_results.h"
#include "tests/support/sample_results.h"

int main(int argc, char **argv)
{
    if (argc != 2) {
        fputs("usage: write_sample_report FOLDER\n", stderr);
        return 2;
    }
    g_autoptr(RfResults) results = sample_results_new();
    g_autoptr(GError) error = NULL;
    g_autoptr(RfResultFolder) folder = rf_result_folder_open(argv[1], &error);
    if (folder && rf_write_results(results, folder, RF_WRITE_RESULTS_ALL, &error) &&
        rf_result_folder_commit(folder, &error))
        return 0;
    fprintf(stderr, "%s\n", error->message);
    return 1;
}
