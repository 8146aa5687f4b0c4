/* The bench's charts on the screen and as files: bench.csv, bench.json, figures/ and a page. Not for finding anything. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "cli/bench.h"

/* A paragraph a chart. (returns new) */
char *rf_bench_write_summary(const GPtrArray *charts, int columns);
/* One row a point. (returns new) */
char *rf_bench_write_csv(const GPtrArray *charts);
/* (returns new) */
char *rf_bench_write_json(const GPtrArray *charts);
/* The folder `target`, whole or not at all. `warning` (returns new): NULL, or why there are no pictures. */
bool rf_bench_write(const char *target, const GPtrArray *charts, char **warning, GError **error);
