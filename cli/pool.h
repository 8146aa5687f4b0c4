/* Many recordings' results into one: which measurement is whose, the pooled unit, whether the recordings agree, and the
 * verdict, as RfResults that the writers and the report read. Not for reading or writing folders. */
#pragma once

#include "cli/pool_read.h"

typedef struct { /* a recording that has no result, so that the report can say so */
    char *name, *reason;
} RfPoolFailure;

/* `recordings`: RfPoolRecording*, named here; `failures`: RfPoolFailure. Refuses what contradicts itself (pool_check.h).
 * results->measured is false where no recording has an accepted charge. (returns new) */
RfResults *rf_pool_join(GPtrArray *recordings, const GArray *failures, GError **error);
