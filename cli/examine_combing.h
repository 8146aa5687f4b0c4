/* Footage that is said to be progressive but whose frames are woven from two fields taken one after the other: each
 * droplet is then in two places at once. Told by looking at the odd and the even lines apart. For examine.c. */
#pragma once

#include <stdbool.h>

#include "calib/units.h"
#include "cli/watch.h"
#include "tracker/path.h"

/* `combing`: how far apart the two kinds of lines show a droplet, over what it moves in a frame: 0 for a progressive
 * picture, 0.5 (top field first) or -0.5 for two fields; sigma 0 where too little moves to tell. */
bool rf_examine_combing(const RfWatch *watch, const RfPaths *paths, RfValue *combing, GError **error);
