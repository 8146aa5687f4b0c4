/* What `run`, `charge` and `paths` print when they are done: the result on one terminal page. Colour repeats what a word
 * already says. Not for warnings and progress, which go to stderr. */
#pragma once

#include <stdbool.h>

#include "cli/results.h"

typedef struct {
    int lines, columns; /* at least 20 and 80 */
    bool colour;
} RfScreen;

/* The terminal on `fd`, 24 lines of 80 columns where there is none; one line is left for the prompt. Colour on a terminal
 * unless NO_COLOR is set to anything but nothing (no-color.org) or TERM is dumb. */
RfScreen rf_screen_on(int fd);

/* At most `lines` lines: accepted spells first, those beyond are counted, not listed. Why spells were set aside stands
 * beside them where there is room, and is counted by kind in any case. `out_folder` may be NULL. Ends in a newline.
 * (returns new) */
char *rf_screen_summary_new(const RfResults *results, const char *out_folder, const RfScreen *screen);

/* The same for paths that nothing was measured from yet. (returns new) */
char *rf_screen_summary_paths_new(const RfResults *results, const char *out_folder, const RfScreen *screen);
