/* How numbers and names get into a gnuplot script or data file. */
#pragma once

#include <glib.h>
#include <stddef.h>

#include "cli/figure_palette.h"

extern const char *const rf_figure_hue[RF_FIGURE_HUES]; /* hex, without '#' */
extern const double rf_figure_codata_e_C;               /* for figures where no unit was found */

/* Eight digits, a point in every locale. */
void rf_figure_text_number(GString *out, double value);
/* Numbers with blanks between, and the end of the line. */
void rf_figure_text_row(GString *out, const double *values, size_t n);
/* A name that may stand in a gnuplot string: letters, digits and harmless signs only. (returns new) */
char *rf_figure_text_harmless(const char *text);
