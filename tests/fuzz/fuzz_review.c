/* A review file: what somebody decided about droplets, as the report's form or a spreadsheet writes it. */
#include <stdlib.h>

#include "cli/review.h"
#include "tests/fuzz/target.h"

int LLVMFuzzerTestOneInput(const uint8_t *bytes, size_t size)
{
    g_autofree char *path = rf_target_file("review.csv", bytes, size);
    g_autoptr(RfResults) results = rf_results_new();
    GError *error = NULL;
    if (!rf_review_read(path, results, &error)) rf_target_check_words(error);
    return 0;
}
