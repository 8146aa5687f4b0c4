/* What `run` and `charge` print when they are done: the result on one terminal page. Colour repeats what a word
 * already says. Not for warnings and progress, which go to stderr. */
#pragma once

#include <stdbool.h>

#include "cli/results.h"

/* True on a terminal, unless NO_COLOR is set to anything but nothing (no-color.org) or TERM is dumb. */
bool rf_screen_summary_wants_colour(int fd);

/* At most `lines` lines (>= 20; droplets beyond that are counted, not listed), at most 80 columns for plain droplets.
 * `out_folder` may be NULL. Ends in a newline. (returns new) */
char *rf_screen_summary_new(const RfResults *results, const char *out_folder, int lines, bool colour);
