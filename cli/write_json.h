/* scale.json, summary.json and a pool's pool.json as text: results -> string. Key order is fixed; what could not be found
 * is null, with the reason in a key beside it. All return a new string that ends in a newline. */
#pragma once

#include "cli/results.h"

char *rf_write_json_scale(const RfResults *results);
char *rf_write_json_summary(const RfResults *results);
char *rf_write_json_pool(const RfResults *results);
