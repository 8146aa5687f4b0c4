/* Figures for report and paper: gnuplot draws, and its data and script stay beside the picture so that people can
 * restyle them. gnuplot is called directly (no shell) with a fixed environment; where it is missing the data and the
 * script are written all the same, and `warning` says what is missing: never a failure of the run. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "cli/result_folder.h"
#include "cli/results.h"

typedef struct {
    char *name; /* "charges": figures/charges.dat, .gp, .svg, .pdf */
    char *title;
    char *alt; /* what a person who can't see it should know */
    char *svg; /* as drawn; NULL where there is no picture */
} RfFigure;

typedef struct {
    GPtrArray
        *figures; /* RfFigure*, in the order of the report; only those for which there is something to draw */
    char *warning; /* NULL, or why pictures are missing */
} RfFigureSet;

/* Draws into figures/ of the folder. Fails only where the folder can't be written. (returns new) */
RfFigureSet *rf_figure_draw(const RfResults *results, RfResultFolder *folder, GError **error);
/* For figures of other things than results: make a set, add RfFigure whose NAME.dat and NAME.gp are in figures/ already, and
 * draw them all. What goes wrong is in set->warning. */
RfFigureSet *rf_figure_set_new(void);
void rf_figure_set_draw(RfFigureSet *set, const RfResultFolder *folder, const char *plotter);

/* NULL where that figure was not drawn. (borrowed) */
const RfFigure *rf_figure_find(const RfFigureSet *set, const char *name);
void rf_figure_set_free(RfFigureSet *set);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfFigureSet, rf_figure_set_free)

/* The program to call: "gnuplot" looked up in PATH, unless a test names another. */
RfFigureSet *rf_figure_draw_with(const RfResults *results, RfResultFolder *folder, const char *plotter,
                                 GError **error);
