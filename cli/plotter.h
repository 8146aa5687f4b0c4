/* gnuplot at work: the frame that every script shares, and running it without a shell in fixed surroundings. Not for
 * what is drawn: figure_*.c and plan_write.c write that. */
#pragma once

#include <stdbool.h>

typedef struct {
    const char *screen; /* "860,430": pixels of the SVG */
    const char *page;   /* "17cm,8.5cm": size of the PDF */
} RfPlotterSize;

/* A whole script NAME.gp that draws NAME.svg, and NAME.pdf where that terminal was built in, with `body` as the part of
 * its own. Works with gnuplot 5.2 and later. (returns new) */
char *rf_plotter_script(const char *name, const char *title, const RfPlotterSize *size, const char *body);

/* Runs `scripts` (names, ending with NULL) one after the other in the folder `inside`, by one process: starting one costs
 * more than a figure. false with what went wrong in `complaint` (returns new): which script it was, only where it was the
 * only one. */
bool rf_plotter_run(const char *program, const char *inside, const char *const *scripts, char **complaint);
