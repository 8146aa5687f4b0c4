/* From sightings to droplets' paths: one ordered pass that links what can't be mistaken, a second look over
 * the whole recording that joins the pieces by what stays the same in a droplet (fall speed, response to the
 * field, brightness), then gaps filled and paths smoothed. Not for finding spots, nor for switches or
 * charges.
 *
 * Meant to be called twice: first with an unknown field, then, when the switches have been read from the
 * paths of the first call, with the known one: then reversals are predicted instead of guessed. The result
 * depends on nothing but the arguments. */
#pragma once

#include <glib.h>

#include "tracker/field_course.h"
#include "tracker/path.h"
#include "tracker/sightings.h"

typedef struct {
    double longest_gap_s;     /* > 0; a droplet out of sight for longer is a new droplet */
    double max_speed_px_s;    /* square pixels; 0: found from the data */
    double least_evidence;    /* log likelihood ratio against chance that a path must reach */
    unsigned least_seen;      /* measured points that a path must have */
    double least_extent_px;   /* a path that never leaves a circle of about this diameter is a speck, not a
                                 droplet */
    double decision_log_odds; /* joins whose best alternative is nearer than this are cut */
} RfLinkerOptions;

#define RF_LINKER_DEFAULTS                                                                                   \
    {                                                                                                        \
        .longest_gap_s = 1.0, .max_speed_px_s = 0, .least_evidence = 15, .least_seen = 6,                    \
        .least_extent_px = 3, .decision_log_odds = 3                                                         \
    }

typedef enum {
    RF_LINKER_ERROR_ORDER, /* exposures or spots are not in the order that the sightings promise */
} RfLinkerError;

#define RF_LINKER_ERROR (rf_linker_error_quark())
GQuark rf_linker_error_quark(void);

/* (returns new) Paths in order of first appearance; none found is a legal result. NULL and error only where
 * exposures are out of order or spots don't belong to them. options NULL: defaults. */
RfPaths *rf_linker_run(const RfSightings *sightings, const RfFieldCourse *field,
                       const RfLinkerOptions *options, GError **error);
