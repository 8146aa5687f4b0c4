/* The audit's own files and its summary on screen: audit.csv, audit.json (the same rows, the person, and charges from hand timings) and a page.
 * Not for auditing. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "cli/result_folder.h"
#include "cli/results.h"

bool rf_write_audit(const RfResults *results, RfResultFolder *folder, GError **error);
/* The person, the hand charges, and the rows of audit.csv. (returns new) */
char *rf_write_audit_json(const RfResults *results);
/* The person in a few lines, then every entry that isn't sound, wrapped at `columns`. `out` NULL: nothing was written.
 * (returns new) */
char *rf_write_audit_summary(const RfResults *results, const char *out, int columns);
