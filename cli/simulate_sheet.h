/* The run sheet that a person at the synthetic bench would have written: what the scene states, not what is true. */
#pragma once

#include "cli/simulate_scene.h"

/* "recording.mkv"; the ending follows the codec. Static. */
const char *rf_simulate_sheet_video_name(const RfScene *scene);

/* (returns new) */
char *rf_simulate_sheet(const RfScene *scene, const char *video);
