#include "cli/plan_text.h"

#include <math.h>

#include "cli/text_number.h"
#include "physics/constants.h"

static const double E = RF_ELEMENTARY_CHARGE_COULOMB;

bool rf_plan_common(const RfChargeInputs *inputs, RfPlanCommon *common, GError **error)
{
    const RfChargeEstimate typical = {.radius_m = {0.5e-6, 0}, .charge_coulomb = {3 * E, 0}};
    const RfBudgetOptions first_order = {.seed = 1, .coverage = 0.95};
    RfBudgetInput lines[RF_CHARGE_LINES];
    g_autoptr(RfBudget) budget = rf_charge_budget_new(inputs, &typical, &first_order, lines, error);
    if (!budget) return false;
    *common = (RfPlanCommon){budget->sigma / fabs(budget->value), lines[budget->largest].name};
    return true;
}

/* ---- the table ---- */

/* Two digits that matter: 0.37, 0.083, 1.2, 37. */
static void append_two_digits(GString *out, double value)
{
    const int decimals = value < 0.0995 ? 3 : value < 0.995 ? 2 : value < 9.95 ? 1 : 0;
    rf_text_number_append_fixed(out, value, decimals);
}

static const RfPlanRow *row_of(const GArray *rows, double radius_m, int units)
{
    for (guint i = 0; i < rows->len; i++) {
        const RfPlanRow *row = &g_array_index(rows, RfPlanRow, i);
        if (row->units == units && fabs(row->radius_m - radius_m) < 1e-9) return row;
    }
    g_assert_not_reached();
}

/* "0.37/0.13": radius from the fall alone, and from the spread too. */
static char *pair_text(const RfPlanOn *on)
{
    GString *text = g_string_new(NULL);
    append_two_digits(text, on->u_charge_fall_coulomb / E);
    g_string_append_c(text, '/');
    append_two_digits(text, on->u_charge_joint_coulomb / E);
    return g_string_free(text, FALSE);
}

/* Of the sign that is known worse. */
static char *worse_text(const RfPlanRow *row)
{
    GString *text = g_string_new(NULL);
    append_two_digits(text, fmax(row->down.u_charge_joint_coulomb, row->up.u_charge_joint_coulomb) / E);
    return g_string_free(text, FALSE);
}

static char *watch_text(const RfPlanRow *row)
{
    return row->watch_s >= RF_PLAN_WATCH_MOST_S ? g_strdup("> 1 h")
                                                : g_strdup_printf("%.0f", ceil(row->watch_s));
}

/* "1-6 e": the charges worth picking at a radius. They hang together: faster ones are cut off above, heavier below. */
static char *picks_text(const GArray *rows, double radius_m)
{
    int low = 0, high = 0;
    for (int units = 1; units <= RF_PLAN_UNITS_MOST; units++) {
        if (row_of(rows, radius_m, units)->advice != RF_PLAN_PICK) continue;
        low = low ? low : units;
        high = units;
    }
    if (low) return low == high ? g_strdup_printf("%d e", low) : g_strdup_printf("%d-%d e", low, high);
    return g_strdup("-");
}

static void append_radius(GString *out, const GArray *rows, double radius_m)
{
    const RfPlanRow *three = row_of(rows, radius_m, 3);
    const double per_unit_m_s = (three->down.fall_m_s - three->fall_off_m_s) / 3;
    g_autofree char *down = pair_text(&three->down), *up = pair_text(&three->up);
    g_autofree char *one = worse_text(row_of(rows, radius_m, 1));
    g_autofree char *ten = worse_text(row_of(rows, radius_m, RF_PLAN_UNITS_MOST));
    g_autofree char *watch = watch_text(three), *picks = picks_text(rows, radius_m);
    g_string_append_printf(out, "%4.2f %6.1f %6.1f %5.0f %5.1f %11s %11s %5s %5s %5s %6s\n", 1e6 * radius_m,
                           1e6 * three->fall_off_m_s, 1e6 * per_unit_m_s, three->in_view_off_s,
                           fmin(three->down.in_view_s, three->up.in_view_s), down, up, one, ten, watch,
                           picks);
}

static void append_conditions(GString *out, const RfPlanConditions *conditions)
{
    const RfObservation *o = &conditions->observation;
    g_string_append_printf(
        out, "%.4g V over %.4g mm, %.4g s off, %.4g s on, %.4g frames/s, view %.4g mm, u(x) %.2g um\n",
        o->voltage_V, 1e3 * conditions->medium.plate_gap_m, o->off_s, o->on_s, o->frame_rate_hz,
        1e3 * o->view_m, 1e6 * o->localisation_m);
}

/* ---- advice ---- */

typedef struct {
    double radius_low_m, radius_high_m, fall_low_m_s, fall_high_m_s, watch_s;
    unsigned n;
} Picks;

static Picks picks_of(const GArray *rows)
{
    Picks picks = {.radius_low_m = HUGE_VAL, .fall_low_m_s = HUGE_VAL};
    for (guint i = 0; i < rows->len; i++) {
        const RfPlanRow *row = &g_array_index(rows, RfPlanRow, i);
        if (row->advice != RF_PLAN_PICK) continue;
        picks.n++;
        picks.radius_low_m = fmin(picks.radius_low_m, row->radius_m);
        picks.radius_high_m = fmax(picks.radius_high_m, row->radius_m);
        picks.fall_low_m_s = fmin(picks.fall_low_m_s, row->fall_off_m_s);
        picks.fall_high_m_s = fmax(picks.fall_high_m_s, row->fall_off_m_s);
        picks.watch_s = fmax(picks.watch_s, row->watch_s);
    }
    return picks;
}

static const char *commonest_obstacle(const GArray *rows)
{
    unsigned n[RF_PLAN_TOO_HEAVY + 1] = {0}, worst = RF_PLAN_TOO_UNCERTAIN;
    for (guint i = 0; i < rows->len; i++) n[g_array_index(rows, RfPlanRow, i).advice]++;
    for (unsigned i = RF_PLAN_TOO_UNCERTAIN; i <= RF_PLAN_TOO_HEAVY; i++)
        if (n[i] > n[worst]) worst = i;
    return rf_plan_advice_to_string((RfPlanAdvice)worst);
}

static void append_picks(GString *out, const RfPlanConditions *conditions, const GArray *rows)
{
    const Picks picks = picks_of(rows);
    if (picks.n == 0) {
        g_string_append_printf(out, "pick     none of these: most are %s; try other times, voltage or view\n",
                               commonest_obstacle(rows));
        return;
    }
    const double view_m = conditions->observation.view_m;
    g_string_append_printf(out,
                           "pick     %.2f to %.2f um, charges as listed; off, they cross in %.0f to %.0f s\n",
                           1e6 * picks.radius_low_m, 1e6 * picks.radius_high_m, view_m / picks.fall_high_m_s,
                           view_m / picks.fall_low_m_s);
    g_string_append_printf(out,
                           "watch    %.0f s, off and on together, brings every one of them below %.2f e\n",
                           ceil(picks.watch_s), RF_PLAN_GOOD_U_E);
}

static void append_voltages(GString *out, const RfPlanConditions *conditions)
{
    const RfPlanVoltages voltages = rf_plan_voltages(conditions);
    const int decimals = voltages.voltage_V[0] < 20 ? 1 : 0;
    g_string_append(out, "voltage ");
    for (unsigned i = 0; i < RF_PLAN_VOLTAGES; i++)
        g_string_append_printf(out, "%s %.*f V: %u", i ? "," : "", decimals, voltages.voltage_V[i],
                               voltages.picks[i]);
    g_string_append_printf(out, "\n         of %u worth picking", rf_plan_radii * RF_PLAN_UNITS_MOST);
    if (voltages.picks[voltages.best] > 0)
        g_string_append_printf(out, "; best %.*f V, if supply and local rules allow", decimals,
                               voltages.voltage_V[voltages.best]);
    g_string_append_c(out, '\n');
}

static void append_common(GString *out, const RfPlanCommon *common)
{
    if (!common || !(common->relative_u > 0)) return;
    g_string_append_printf(out, "shared   inputs common to all droplets add %.2g %% of a charge (most: %s)\n",
                           100 * common->relative_u, common->largest);
}

char *rf_plan_text(const RfPlanConditions *conditions, const GArray *rows, const RfPlanCommon *common)
{
    GString *out = g_string_new(NULL);
    append_conditions(out, conditions);
    g_string_append(out, "   r    off  on +-     view, s 3 e: fall alone/+spread   1 e  10 e watch   pick\n"
                         "  um   um/s  per e   off on 3e     q V > 0     q V < 0   u/e   u/e 3e, s\n");
    for (unsigned i = 0; i < rf_plan_radii; i++) append_radius(out, rows, rf_plan_radii_m[i]);
    append_picks(out, conditions, rows);
    append_voltages(out, conditions);
    append_common(out, common);
    return g_string_free(out, FALSE);
}

/* ---- for other programs ---- */

static void append_numbers(GString *out, const double *values, size_t n)
{
    for (size_t i = 0; i < n; i++) {
        char text[G_ASCII_DTOSTR_BUF_SIZE];
        g_string_append_c(out, ',');
        g_string_append(out, g_ascii_formatd(text, sizeof text, "%.6g", values[i]));
    }
}

char *rf_plan_csv(const GArray *rows)
{
    GString *out = g_string_new(
        "radius_um,charge_e,fall_off_mm_s,fall_down_mm_s,fall_up_mm_s,in_view_off_s,in_view_down_s,in_view_"
        "up_s,"
        "diffusion_um2_s,u_charge_fall_down_e,u_charge_joint_down_e,u_charge_fall_up_e,u_charge_joint_up_e,"
        "spread_share,watch_s,advice\n");
    for (guint i = 0; i < rows->len; i++) {
        const RfPlanRow *row = &g_array_index(rows, RfPlanRow, i);
        const double numbers[] = {row->fall_off_m_s * 1e3,
                                  row->down.fall_m_s * 1e3,
                                  row->up.fall_m_s * 1e3,
                                  row->in_view_off_s,
                                  row->down.in_view_s,
                                  row->up.in_view_s,
                                  row->diffusion_m2_s * 1e12,
                                  row->down.u_charge_fall_coulomb / E,
                                  row->down.u_charge_joint_coulomb / E,
                                  row->up.u_charge_fall_coulomb / E,
                                  row->up.u_charge_joint_coulomb / E,
                                  row->spread_share,
                                  row->watch_s};
        rf_text_number_append_fixed(out, row->radius_m * 1e6, 3);
        g_string_append_printf(out, ",%d", row->units);
        append_numbers(out, numbers, G_N_ELEMENTS(numbers));
        g_string_append_printf(out, ",%s\n", rf_plan_advice_to_string(row->advice));
    }
    return g_string_free(out, FALSE);
}
