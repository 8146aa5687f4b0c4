#include "cli/figure_script.h"

const RfFigureScript rf_figure_scripts[] = {
    {"recordings", "Each recording's own unit", RF_FIGURE_OF_POOL, rf_figure_recordings_write},
    {"charges", "Charges against whole multiples", RF_FIGURE_OF_RUN, rf_figure_charges_write},
    {"multiples", "Distance from the nearest whole multiple", RF_FIGURE_OF_RUN, rf_figure_multiples_write},
    {"residues", "Distance from the nearest whole multiple", RF_FIGURE_OF_POOL, rf_figure_residues_write},
    {"velocities", "Velocities in time", RF_FIGURE_OF_RUN, rf_figure_velocities_write},
    {"unit", "How well a unit explains the charges", RF_FIGURE_OF_BOTH, rf_figure_unit_write},
    {"radius", "Radius from fall against radius from spread", RF_FIGURE_OF_RUN, rf_figure_radius_write},
    {"budget", "What limits the charge", RF_FIGURE_OF_BOTH, rf_figure_budget_write},
};
const size_t rf_figure_scripts_n = G_N_ELEMENTS(rf_figure_scripts);
