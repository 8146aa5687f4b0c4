/* Every file of a pool's folder: pool.json, recordings.csv, droplets.csv, measurements.csv, figures/, report.html; and the
 * summary for the screen. What is in each lives in the writers. */
#pragma once

#include "cli/result_folder.h"
#include "cli/results.h"

/* Adds the files; the caller commits. Warnings about figures are added to results->warnings. */
bool rf_write_pool(RfResults *results, RfResultFolder *folder, GError **error);

/* At most 24 lines, 80 columns where names allow. (returns new) */
char *rf_write_pool_summary(const RfResults *results, const char *out_folder);
