/* Pictures for people: the recording's fixed background as a PNG, brightened so that the reticle shows. */
#pragma once

#include <glib.h>

#include "calib/length_scale.h"
#include "tracker/background.h"

/* (returns new) 8-bit grey, the background's own size; NULL where it can't be encoded. */
GBytes *rf_view_background_png(const RfBackground *background);

/* A picture of the reticle with the lines found drawn over it in colour; `grey` 8-bit, rows without padding. (returns new) */
GBytes *rf_view_lines_png(const unsigned char *grey, int width, int height, const RfLengthScale *scale, GError **error);

/* Any picture as 8-bit grey, stretched so that 0.5 % of the pixels are black and 0.5 % white. (returns new) */
unsigned char *rf_view_grey(const RfPicture *picture);
