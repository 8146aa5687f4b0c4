/* A scene from a few lines, for the tests of the simulation. */
#pragma once

#include "cli/simulate_scene.h"

/* [picture] with duration 2 s, 400 px/mm and seed 5 is already there; `more` goes on in it. Ends the test on error.
 * (returns new) */
RfScene *scene_from_text(const char *more);
