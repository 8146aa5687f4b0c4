/* The folder that a plan leaves: plan.txt, plan.csv, figures/plan.{dat,gp,svg,pdf}. Whole or not at all. */
#pragma once

#include "cli/plan_text.h"

/* `warning` (returns new, or NULL): why there is no picture, which is no failure. */
bool rf_plan_write(const char *folder, const RfPlanConditions *conditions, const GArray *rows,
                   const char *text, char **warning, GError **error);

/* The figure's data and its own part of the script. */
void rf_plan_figure(const RfPlanConditions *conditions, GString *data, GString *script);
