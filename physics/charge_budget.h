/* The uncertainty budget of one droplet's charge and radius: every input by name, random and common parts apart,
 * JCGM 100 and 101 side by side (budget.h). Not for estimating the charge: it takes the estimate and asks what the inputs
 * could have done to it.
 *
 * What the paths fix are velocities (and a diffusion coefficient) in units of the stated scale; so
 *   charge = k(a) d (u + c (v_g(a) - v_off)),   a = (1 - w) a_fall + w a_spread,
 * u the speed per volt, a_fall from the speed without field v_off and the weight, a_spread from D, w the share of the
 * radius' information that the spread has; c, about -1/V, because the joint fit ties the fall to the radius and lays what
 * is left of the speed under field on the charge. With the scale off by a factor s, speeds go as s and D as s^2. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "calib/units.h"
#include "physics/air.h"
#include "physics/budget.h"
#include "physics/drag.h"
#include "physics/oil.h"

/* Inputs of the whole run, as stated (sheet or default). Sigma 0: exact, and without a line of its own effect. */
typedef struct {
    RfValue plate_gap_m;
    double voltage_relative_u; /* of the supply: whichever voltages were used */
    double scale_relative_u;   /* of picture to metres: reticle spacing, fit, plane ratio */
    RfValue gravity_m_s2;
    RfOil oil;
    RfValue temperature_kelvin, pressure_pa;
    RfValue humidity; /* 0..1 */
    RfViscosityLaw viscosity_law;
    RfValue viscosity_pa_s; /* for RF_VISCOSITY_GIVEN */
    RfSlipLaw slip_law;
    RfValue slip_b_pa_m;      /* for RF_SLIP_ONE_TERM */
    double air_drift_u_m_s;   /* unknown steady motion of the air along gravity, common to all droplets */
    RfValue evaporation_m2_s; /* shrinkage taken off the paths (evaporation.h); all 0: none was */
} RfChargeInputs;

/* The medium at the stated values, as the path estimator takes it. */
RfMedium rf_charge_budget_medium(const RfChargeInputs *inputs);

/* One droplet as estimated with that medium. */
typedef struct {
    RfValue radius_m;       /* > 0; sigma random */
    RfValue charge_coulomb; /* sigma random */
    double spread_share;    /* w, 0..1: the spread's share of the radius' information */
    double fall_leak_per_v; /* c: what the speed per volt gains per speed that the fall is assumed to gain */
    double evaporation_radius_m, evaporation_coulomb; /* what one sigma of evaporation_m2_s does */
} RfChargeEstimate;

/* Lines of the budget, in the order of RfBudget.parts. */
typedef enum {
    RF_CHARGE_LINE_PATH, /* this droplet's own paths: the random part */
    RF_CHARGE_LINE_SCALE,
    RF_CHARGE_LINE_GAP,
    RF_CHARGE_LINE_VOLTAGE,
    RF_CHARGE_LINE_GRAVITY,
    RF_CHARGE_LINE_OIL_DENSITY,
    RF_CHARGE_LINE_TEMPERATURE,
    RF_CHARGE_LINE_PRESSURE,
    RF_CHARGE_LINE_HUMIDITY,
    RF_CHARGE_LINE_VISCOSITY, /* the law, and moisture */
    RF_CHARGE_LINE_SLIP,      /* the law, or b */
    RF_CHARGE_LINE_AIR_DRIFT,
    RF_CHARGE_LINE_EVAPORATION, /* no line where none was taken off */
    RF_CHARGE_LINES,
} RfChargeLine;

const char *rf_charge_line_to_string(RfChargeLine line); /* "plate gap" */

/* Budgets in coulomb and in metres. The inputs handed to budget.h are left in inputs_out (RF_CHARGE_LINES of them) if
 * not NULL, for printing. (returns new) */
RfBudget *rf_charge_budget_new(const RfChargeInputs *inputs, const RfChargeEstimate *estimate,
                               const RfBudgetOptions *options, RfBudgetInput *inputs_out, GError **error);
RfBudget *rf_charge_budget_radius_new(const RfChargeInputs *inputs, const RfChargeEstimate *estimate,
                                      const RfBudgetOptions *options, RfBudgetInput *inputs_out,
                                      GError **error);
