/* A plan as people read it (a table that fits one page of a terminal, with advice below) and as a table for other
 * programs. Pure. */
#pragma once

#include <glib.h>

#include "cli/plan.h"
#include "physics/charge_budget.h"

/* What the inputs shared by all droplets add to a charge, relative; they don't average out. */
typedef struct {
    double relative_u;
    const char *largest; /* "plate gap" */
} RfPlanCommon;

/* `inputs` with the scale's uncertainty. */
bool rf_plan_common(const RfChargeInputs *inputs, RfPlanCommon *common, GError **error);

/* Both (returns new). `common` may be NULL. */
char *rf_plan_text(const RfPlanConditions *conditions, const GArray *rows, const RfPlanCommon *common);
char *rf_plan_csv(const GArray *rows);
/* Conditions, what is shared, and the rows of the table with the same keys. (returns new) */
char *rf_plan_json(const RfPlanConditions *conditions, const GArray *rows, const RfPlanCommon *common);
