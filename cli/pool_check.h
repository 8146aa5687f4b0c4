/* Do these recordings belong into one pool? The same one twice and one name for two measurements are refused; what a reader
 * should know before trusting the pool becomes a warning. Not for whether their units agree: physics/pooled_unit.h. */
#pragma once

#include "cli/pool_read.h"

/* Names each recording after its folder; where two folders are called alike, after the whole path. */
void rf_pool_check_names(const GPtrArray *recordings);

/* RF_POOL_ERROR_CONFLICT, naming both. Parts of one recording that don't overlap in time may both be there. */
bool rf_pool_check_twice(const GPtrArray *recordings, GError **error);
bool rf_pool_check_shared(const GPtrArray *recordings, GError **error);

/* Other program versions or analysis settings; inputs of one and the same value that no name makes one measurement. */
void rf_pool_check_alike(const GPtrArray *recordings, RfResults *results);
