/* The audit of a stopwatch record, from file to findings. The plot; the parts are hand_timings, line_crossings, audit_match,
 * audit_findings and audit_person. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "cli/results.h"
#include "physics/medium.h"

/* Is it a table of timings at all? For whoever wants to refuse before hours of work. */
bool rf_audit_can_read(const char *path, GError **error);

/* Fills results->audit, ->person and ->hand_charges from the record at `path` and the results so far (paths, switches,
 * droplets, scale). Unreadable entries become rows of their own and one warning. `medium` NULL: no charges from hand
 * timings. Refuses a record that is no table, and a scale without lines across gravity. */
bool rf_audit_timings(const char *path, RfResults *results, const RfMedium *medium, GError **error);
