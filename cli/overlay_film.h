/* The overlay film: the recording once more, at full length and size, with every droplet ringed and numbered, the paths so
 * far of those in view, the time and the field. For looking at what was followed; the report's own footage is
 * preview_film.h. */
#pragma once

#include "cli/film_picture.h"
#include "cli/results.h"
#include "cli/settings.h"

/* `path` ends in .mp4; what is left there after an error is worthless. */
bool rf_overlay_film(const RfSettings *settings, const RfResults *results, const RfFilmHooks *hooks,
                     const char *path, GError **error);
