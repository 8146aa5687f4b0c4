/* report.html: one self-contained page that opens from disk and asks for nothing outside itself. Works without
 * scripts; with them, choosing a droplet marks it everywhere. Every text that came from a sheet, a table or a label
 * is escaped. results->view_png is the bare view: the page draws the paths over it. */
#pragma once

#include <glib.h>

#include "cli/bench.h"
#include "cli/figure.h"
#include "cli/results.h"

/* `figures` may be NULL: the page then says that there are none. (returns new) */
GString *rf_report_html_new(const RfResults *results, const RfFigureSet *figures);

/* The page of a pool: results->recordings holds its recordings. (returns new) */
GString *rf_report_html_pool_new(const RfResults *results, const RfFigureSet *figures);

/* Only the section on hand timings, as a page of its own. (returns new) */
GString *rf_report_html_audit_new(const RfResults *results);

/* Control charts: RfBenchChart, and the figures chart-1, chart-2 ... of them. (returns new) */
GString *rf_report_html_bench_new(const GPtrArray *charts, const RfFigureSet *figures);
