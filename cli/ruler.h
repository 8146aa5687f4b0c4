/* Which picture the scale is read from: the sheet's still of the reticle, or the recording's own fixed background.
 * Not for reading it: calib/length_scale.h does. */
#pragma once

#include <glib.h>

#include "calib/length_scale.h"
#include "calib/picture_frame.h"
#include "cli/results.h"
#include "cli/settings.h"
#include "tracker/background.h"
#include "tracker/video_file.h"

/* `background` may be NULL where the sheet names a still. (returns new) */
RfLengthScale *rf_ruler_measure(const RfSettings *settings, const RfBackground *background, GError **error);

/* The pixels of either as the scale finder reads them (borrowed). */
RfPicture rf_ruler_still(const RfStill *still);
RfPicture rf_ruler_background(const RfBackground *background);

/* For scale.json and the report; `source` is copied. */
void rf_ruler_describe(const RfLengthScale *scale, const char *source, RfScaleRow *row);

/* Where the lines across gravity lie in the cell, for the audit of hand timings: fills has_lines and line_* of `row`. */
void rf_ruler_lines(const RfLengthScale *scale, const RfPictureFrame *frame, RfScaleRow *row);

/* What the report calls the picture. (borrowed) */
const char *rf_ruler_source(const RfSettings *settings);
