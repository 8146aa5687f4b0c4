#include "cli/figure_script.h"

const RfFigureScript rf_figure_scripts[] = {
    {"charges", "Charges against whole multiples", rf_figure_charges_write},
    {"multiples", "Distance from the nearest whole multiple", rf_figure_multiples_write},
    {"velocities", "Velocities in time", rf_figure_velocities_write},
    {"unit", "How well a unit explains the charges", rf_figure_unit_write},
    {"radius", "Radius from fall against radius from spread", rf_figure_radius_write},
    {"budget", "What limits the charge", rf_figure_budget_write},
};
const size_t rf_figure_scripts_n = G_N_ELEMENTS(rf_figure_scripts);
