/* Every file of a result folder, in one call: tables, scale and summary, figures, report. The order and the names
 * live here; what is in each file lives in the writers. */
#pragma once

#include "cli/result_folder.h"
#include "cli/results.h"

typedef enum {
    RF_WRITE_RESULTS_ALL,   /* run, charge */
    RF_WRITE_RESULTS_PATHS, /* paths: paths.csv with scale.json and summary.json */
} RfWriteResultsPart;

/* Adds the files; the caller commits. Warnings about figures are added to results->warnings. */
bool rf_write_results(RfResults *results, RfResultFolder *folder, RfWriteResultsPart part, GError **error);
