/* A review: what a person decided otherwise than the program did, as the report page saves it and the sheet's `review=`
 * names it. One row per decision:
 *
 *   action                      set aside | restore | cut | join
 *   droplet                     its number in the report at hand, which may change from run to run
 *   time_s, x_px, y_px          one place where it was seen, which doesn't change: that finds the droplet again
 *   cut_s                       of a cut: when; what is seen from then on becomes a droplet of its own
 *   other_droplet, other_time_s, other_x_px, other_y_px    of a join: the second droplet, alike
 *   reason, name                why and who; both needed
 *   date                        when, as the person writes it; may be blank
 *   recording_sha256            of the recording it belongs to (several files: in order, a blank between); may be blank
 *
 * Columns in any order, separators and quotes as spreadsheets write them (calib/table.h); further columns are left
 * alone. Not for what comes of an entry: review_paths.h and review_verdicts.h. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "cli/results.h"

typedef enum {
    RF_REVIEW_ERROR_OTHER_RECORDING, /* made for another recording than the sheet's */
} RfReviewError;

#define RF_REVIEW_ERROR (rf_review_error_quark())
GQuark rf_review_error_quark(void);

/* Adds the entries to results->review, all with outcome RF_REVIEW_NOT_FOUND so far; results->inputs must name the
 * recording. A cell that won't do, or a review of another recording, is an error: a person's decision is never left
 * out in silence. Warns of entries that don't say which recording they belong to. */
bool rf_review_read(const char *path, RfResults *results, GError **error);

/* The digests of the recording's files in order, a blank between. (returns new) */
char *rf_review_recording(const RfResults *results);

const char *rf_review_action_to_string(RfReviewAction action);
const char *rf_review_outcome_to_string(RfReviewOutcome outcome);

/* Decides what came of an entry; takes over `detail`. */
void rf_review_settle(RfReviewRow *row, RfReviewOutcome outcome, char *detail);
