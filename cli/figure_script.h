/* What each figure shows: a data file and a gnuplot script that draws it. Not for running gnuplot: see figure.h. Only
 * text that gnuplot can't take for a command leaves this file. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "cli/results.h"

typedef enum {
    RF_FIGURE_OF_RUN = 1,
    RF_FIGURE_OF_POOL = 2,
    RF_FIGURE_OF_BOTH = RF_FIGURE_OF_RUN | RF_FIGURE_OF_POOL,
} RfFigureOf;

typedef struct {
    const char *name;
    const char *title;
    RfFigureOf of;
    /* Fills data and script, and says in `alt` what is to be seen. False: nothing to draw. */
    bool (*write)(const RfResults *results, GString *data, GString *script, GString *alt);
} RfFigureScript;

/* In the order of the report. */
extern const RfFigureScript rf_figure_scripts[];
extern const size_t rf_figure_scripts_n;

/* One file each: figure_<name>.c. */
bool rf_figure_charges_write(const RfResults *results, GString *data, GString *script, GString *alt);
bool rf_figure_multiples_write(const RfResults *results, GString *data, GString *script,
                               GString *alt); /* figure_charges.c */
bool rf_figure_velocities_write(const RfResults *results, GString *data, GString *script, GString *alt);
bool rf_figure_unit_write(const RfResults *results, GString *data, GString *script, GString *alt);
bool rf_figure_radius_write(const RfResults *results, GString *data, GString *script, GString *alt);
bool rf_figure_budget_write(const RfResults *results, GString *data, GString *script, GString *alt);
bool rf_figure_recordings_write(const RfResults *results, GString *data, GString *script,
                                GString *alt); /* figure_pool.c */
bool rf_figure_residues_write(const RfResults *results, GString *data, GString *script,
                              GString *alt); /* figure_pool.c */
