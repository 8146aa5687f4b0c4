/* Films the report's footage: a second look at the recording, at the planned parts of it only. Not for choosing them
 * (preview_plan.h) nor for showing them (report_preview.c). */
#pragma once

#include "cli/film_picture.h"
#include "cli/preview.h"
#include "cli/results.h"
#include "cli/settings.h"

/* The film's longer side: 640 x 480 footage stays as it is, pixel for pixel. */
enum { RF_PREVIEW_LONGEST_PX = 640 };

/* `scratch` is a name for a file that may be written and is gone afterwards; it must end in .webm. NULL without an error:
 * there is nothing to film. (returns new) */
RfPreview *rf_preview_film(const RfSettings *settings, const RfResults *results, const RfFilmHooks *hooks,
                           const char *scratch, GError **error);
