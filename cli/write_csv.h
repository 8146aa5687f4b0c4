/* The tables of the result folder as text: results -> string, nothing else. RFC 4180 quoting, lines end in '\n', the
 * decimal sign is a point in every locale, and every column has a fixed number of digits, so that the same results
 * give the same bytes. An empty cell means "not there". All functions return a new string. */
#pragma once

#include <glib.h>

#include "cli/results.h"

GString *rf_write_csv_paths(const RfResults *results);
/* Rounds every number of the RfPathRow to what paths.csv says, so that what is measured from the rows is what anyone can
 * measure from the file. */
void rf_write_csv_settle_paths(GArray *rows);
GString *rf_write_csv_segments(const RfResults *results);
GString *rf_write_csv_switches(const RfResults *results);
GString *rf_write_csv_steps(const RfResults *results);
GString *rf_write_csv_droplets(const RfResults *results);
/* The same, of results->without, which must be there. */
GString *rf_write_csv_droplets_without_review(const RfResults *results);
GString *rf_write_csv_audit(const RfResults *results);
/* input, stated, relative_u, charge_relative_u, charge_relative_u_mc, common (1 shared by all droplets, 0 not) */
GString *rf_write_csv_budget(const RfResults *results);
/* droplet, spell, input, charge_C: what one standard uncertainty of a common input does to a charge, signed */
GString *rf_write_csv_influences(const RfResults *results);

/* ---- of a pool ---- */

/* One row per recording, those without a result too. Offset: its unit less what the others let expect. */
GString *rf_write_csv_recordings(const RfResults *results);
/* What each measurement adds to the pooled unit, largest first; an empty name: each recording's own, together. */
GString *rf_write_csv_measurements(const RfResults *results);
GString *rf_write_csv_pooled_droplets(const RfResults *results);
