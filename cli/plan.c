#include "cli/plan.h"

#include <math.h>

#include "physics/constants.h"

static const double E = RF_ELEMENTARY_CHARGE_COULOMB;

const double rf_plan_radii_m[] = {0.2e-6, 0.25e-6, 0.3e-6, 0.4e-6, 0.5e-6, 0.6e-6,
                                  0.8e-6, 1.0e-6,  1.2e-6, 1.5e-6, 2.0e-6};
const unsigned rf_plan_radii = G_N_ELEMENTS(rf_plan_radii_m);

const char *rf_plan_advice_to_string(RfPlanAdvice advice)
{
    switch (advice) {
    case RF_PLAN_PICK:
        return "pick";
    case RF_PLAN_TOO_UNCERTAIN:
        return "too uncertain";
    case RF_PLAN_TOO_FAST:
        return "too fast";
    case RF_PLAN_TOO_HEAVY:
        break;
    }
    return "too heavy to lift";
}

static RfPlanOn on_of(const RfExpectation *expected)
{
    return (RfPlanOn){expected->fall_on_m_s, expected->in_view_on_s, expected->u_charge_fall_coulomb,
                      expected->u_charge_joint_coulomb};
}

static double worse_u(const RfPlanConditions *conditions, double radius_m, double charge_coulomb)
{
    const RfExpectation down =
        rf_expectation_find(&conditions->medium, &conditions->observation, radius_m, charge_coulomb);
    const RfExpectation up =
        rf_expectation_find(&conditions->medium, &conditions->observation, radius_m, -charge_coulomb);
    return fmax(down.u_charge_joint_coulomb, up.u_charge_joint_coulomb);
}

/* Uncertainty goes nearly as the root of the time, so stepping to where it would be right settles in a few steps. */
static double watch_s(const RfPlanConditions *conditions, double radius_m, double charge_coulomb)
{
    enum { STEPS = 6 };
    const RfObservation given = conditions->observation;
    const double whole_s = given.off_s + given.on_s;
    const double least_s = 8 / given.frame_rate_hz * fmax(whole_s / given.off_s, whole_s / given.on_s);
    double time_s = whole_s;
    for (int i = 0; i < STEPS; i++) {
        RfPlanConditions then = *conditions;
        then.observation.off_s = given.off_s * time_s / whole_s;
        then.observation.on_s = given.on_s * time_s / whole_s;
        const double ratio = worse_u(&then, radius_m, charge_coulomb) / (RF_PLAN_GOOD_U_E * E);
        time_s *= ratio * ratio;
        if (time_s >= RF_PLAN_WATCH_MOST_S) return RF_PLAN_WATCH_MOST_S;
        if (time_s <= least_s) return least_s;
    }
    return time_s;
}

static RfPlanAdvice advice_of(const RfPlanRow *row, const RfObservation *observation)
{
    const double quickest_s = fmin(row->in_view_off_s, fmin(row->down.in_view_s, row->up.in_view_s));
    const bool is_lifted = row->up.fall_m_s < 0;
    if (quickest_s < RF_PLAN_CROSSING_LEAST_S) return RF_PLAN_TOO_FAST;
    if (!is_lifted && row->in_view_off_s < observation->off_s + observation->on_s) return RF_PLAN_TOO_HEAVY;
    const double u = fmax(row->down.u_charge_joint_coulomb, row->up.u_charge_joint_coulomb);
    return u < RF_PLAN_GOOD_U_E * E ? RF_PLAN_PICK : RF_PLAN_TOO_UNCERTAIN;
}

/* All but the time to watch, which costs most. */
static RfPlanRow quick_row(const RfPlanConditions *conditions, double radius_m, int units)
{
    const RfExpectation down =
        rf_expectation_find(&conditions->medium, &conditions->observation, radius_m, units * E);
    const RfExpectation up =
        rf_expectation_find(&conditions->medium, &conditions->observation, radius_m, -units * E);
    RfPlanRow row = {
        .radius_m = radius_m,
        .units = units,
        .fall_off_m_s = down.fall_off_m_s,
        .in_view_off_s = down.in_view_off_s,
        .diffusion_m2_s = down.diffusion_m2_s,
        .spread_share = down.spread_share,
        .down = on_of(&down),
        .up = on_of(&up),
    };
    row.advice = advice_of(&row, &conditions->observation);
    return row;
}

RfPlanRow rf_plan_row(const RfPlanConditions *conditions, double radius_m, int units)
{
    RfPlanRow row = quick_row(conditions, radius_m, units);
    row.watch_s = watch_s(conditions, radius_m, units * E);
    return row;
}

GArray *rf_plan_rows(const RfPlanConditions *conditions)
{
    GArray *rows = g_array_new(FALSE, FALSE, sizeof(RfPlanRow));
    for (unsigned i = 0; i < rf_plan_radii; i++)
        for (int units = 1; units <= RF_PLAN_UNITS_MOST; units++) {
            const RfPlanRow row = rf_plan_row(conditions, rf_plan_radii_m[i], units);
            g_array_append_val(rows, row);
        }
    return rows;
}

unsigned rf_plan_picks(const GArray *rows)
{
    unsigned picks = 0;
    for (guint i = 0; i < rows->len; i++) picks += g_array_index(rows, RfPlanRow, i).advice == RF_PLAN_PICK;
    return picks;
}

static unsigned picks_at(const RfPlanConditions *conditions, double voltage_V)
{
    RfPlanConditions then = *conditions;
    then.observation.voltage_V = voltage_V;
    unsigned picks = 0;
    for (unsigned i = 0; i < rf_plan_radii; i++)
        for (int units = 1; units <= RF_PLAN_UNITS_MOST; units++)
            picks += quick_row(&then, rf_plan_radii_m[i], units).advice == RF_PLAN_PICK;
    return picks;
}

RfPlanVoltages rf_plan_voltages(const RfPlanConditions *conditions)
{
    static const double factors[RF_PLAN_VOLTAGES] = {0.25, 0.5, 0.75, 1, 1.5, 2};
    RfPlanVoltages voltages = {.best = 0};
    for (unsigned i = 0; i < RF_PLAN_VOLTAGES; i++) {
        voltages.voltage_V[i] = factors[i] * conditions->observation.voltage_V;
        voltages.picks[i] = picks_at(conditions, voltages.voltage_V[i]);
        if (voltages.picks[i] > voltages.picks[voltages.best]) voltages.best = i;
    }
    return voltages;
}
