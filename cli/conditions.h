/* From the sheet's inputs to what a droplet feels (RfMedium), and how each input's uncertainty moves every charge at once.
 * These are the common inputs: shared by all droplets, they don't average out. Not for the droplets' own uncertainties. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "calib/length_scale.h"
#include "cli/settings.h"
#include "physics/droplet_fit.h"

typedef struct {
    char *name;              /* "plate gap" */
    char *stated;            /* "6.000(10) mm", as people read it */
    double relative_u;       /* sigma over value; of a temperature: over kelvin. Unitless */
    double shift[RF_INPUTS]; /* change of ln(RfInput) for one standard uncertainty */
} RfCommonInput;

typedef struct {
    RfMedium medium;
    double pressure_pa;
    GPtrArray *inputs; /* RfCommonInput */
} RfConditions;

/* `scale_sigma_relative`: of the scale along gravity. (returns new) */
RfConditions *rf_conditions_new(const RfSettings *settings, double scale_sigma_relative);
void rf_conditions_free(RfConditions *conditions);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfConditions, rf_conditions_free)

/* Standard deviation that one common input causes, from d(quantity)/d ln(RfInput); signed. */
double rf_conditions_effect(const RfCommonInput *input, const double slope[RF_INPUTS]);

/* All of them together, in quadrature. */
double rf_conditions_common_u(const RfConditions *conditions, const double slope[RF_INPUTS]);
