/* Paths of droplets that move in straight lines, as rows: for the tests of what a review does to them. */
#pragma once

#include "cli/results.h"

/* Rows of one more droplet, 30 a second: from (x_px, y_px) at start_s, moving right by speed_px_s, up to and with end_s. */
void straight_paths_add(GArray *rows, unsigned droplet, double start_s, double end_s, double x_px,
                        double y_px, double speed_px_s);

GArray *straight_paths_new(void);
