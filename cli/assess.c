#include "cli/assess.h"

#include "calib/quantity.h"
#include "cli/tally.h"
#include "physics/charge_unit.h"
#include "physics/constants.h"
#include "physics/whole_multiples.h"

#include <math.h>
#include <stdlib.h>

/* A charge less certain than both of these says nothing of use; its row is kept, but set aside. The first is a quarter
 * of the elementary charge, which is about where whole multiples can no longer be told apart. */
static const double useless_sigma_coulomb = 0.25 * RF_ELEMENTARY_CHARGE_COULOMB;
static const double useless_relative_sigma = 0.1;

/* Two radii of one droplet that differ by more than chance allows once in a thousand droplets. */
static const double disagreement_p = 1e-3;

/* ---- droplets ---- */

static char *why_set_aside(const RfDropletFit *fit, const RfSpellFit *spell, double u_charge_coulomb)
{
    double charge_coulomb = fabs(spell->charge_coulomb.value);
    if (!spell->has_charge)
        return g_strdup("no field was on while it was watched: radius only");
    if (fit->radius_agreement_p < disagreement_p) {
        g_autofree char *fall = rf_quantity_format(
            (RfValue){fit->radius_fall_m.value * 1e6, fit->radius_fall_m.sigma * 1e6}, "um");
        g_autofree char *spread = rf_quantity_format(
            (RfValue){fit->radius_spread_m.value * 1e6, fit->radius_spread_m.sigma * 1e6}, "um");
        return g_strdup_printf("radius from the fall, %s, and from the spread, %s, disagree beyond chance (p = %.1g)",
                               fall, spread, fit->radius_agreement_p);
    }
    if (u_charge_coulomb > useless_sigma_coulomb && u_charge_coulomb > useless_relative_sigma * charge_coulomb)
        return g_strdup_printf("charge too uncertain: u = %.2g C, seen with a field on for %.1f s of %.1f s",
                               u_charge_coulomb, spell->on_s, spell->end_s - spell->start_s);
    return g_strdup("");
}

/* Random and common parts in one sigma: value is in any unit, slope is its d/d ln(input) in the same. */
static RfValue with_common(RfValue value, const RfConditions *conditions, const double slope[RF_INPUTS])
{
    return (RfValue){value.value, hypot(value.sigma, rf_conditions_common_u(conditions, slope))};
}

static RfValue scaled(RfValue value, double factor)
{
    return (RfValue){value.value * factor, value.sigma * factor};
}

static void name_whole_multiple(RfDropletRow *row)
{
    RfWholeMultiple multiple = rf_whole_multiples_nearest(row->charge_C);
    row->units_probability = multiple.probability;
    row->has_units = row->accepted && multiple.probability >= 0.95;
    row->units = row->has_units ? multiple.n : 0;
}

static RfDropletRow fitted_row(unsigned droplet, const RfDropletFit *fit, size_t s, const RfConditions *conditions)
{
    const RfSpellFit *spell = &fit->spell[s];
    double fall_slope[RF_INPUTS] = {[RF_INPUT_SCALE] = fit->fall_m_s.value};
    double radius_slope_m[RF_INPUTS];
    for (int i = 0; i < RF_INPUTS; i++)
        radius_slope_m[i] = fit->radius_slope[i] * fit->radius_m.value;
    RfDropletRow row = {
        .droplet = droplet,
        .spell = (unsigned)s + 1,
        .start_s = spell->start_s,
        .end_s = spell->end_s,
        .frames = (unsigned)spell->samples,
        .fall_mm_s = scaled(with_common(fit->fall_m_s, conditions, fall_slope), 1e3),
        .radius_um = scaled(with_common(fit->radius_m, conditions, radius_slope_m), 1e6),
        .radius_fall_um = scaled(fit->radius_fall_m, 1e6),
        .radius_spread_um = scaled(fit->radius_spread_m, 1e6),
        .radius_agreement_p = fit->radius_agreement_p,
        .has_charge = spell->has_charge,
    };
    if (spell->has_charge) {
        row.charge_C = with_common(spell->charge_coulomb, conditions, spell->charge_slope_coulomb);
        row.u_random_C = spell->charge_coulomb.sigma;
    }
    row.reason = why_set_aside(fit, spell, row.charge_C.sigma);
    row.accepted = *row.reason == '\0';
    if (row.has_charge)
        name_whole_multiple(&row);
    return row;
}

/* What the paths say of a droplet as a whole, also of one that could not be fitted. */
typedef struct {
    double start_s, end_s, median_snr;
    unsigned frames;
} Seen;

static int compare_doubles(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

static Seen seen_of(const GArray *paths, unsigned droplet)
{
    g_autoptr(GArray) snr = g_array_new(FALSE, FALSE, sizeof(double));
    Seen seen = {0};
    for (guint i = 0; i < paths->len; i++) {
        const RfPathRow *row = &g_array_index(paths, RfPathRow, i);
        if (row->droplet != droplet || !row->seen)
            continue;
        if (seen.frames++ == 0)
            seen.start_s = row->time_s;
        seen.end_s = row->time_s;
        g_array_append_val(snr, row->snr);
    }
    if (snr->len > 0) {
        qsort(snr->data, snr->len, sizeof(double), compare_doubles);
        seen.median_snr = g_array_index(snr, double, snr->len / 2);
    }
    return seen;
}

static void add_unfitted(RfResults *results, unsigned droplet, const RfDropletFit *fit, const Seen *seen)
{
    RfDropletRow row = {
        .droplet = droplet,
        .spell = 1,
        .start_s = seen->start_s,
        .end_s = seen->end_s,
        .frames = seen->frames,
        .radius_agreement_p = 1,
        .median_snr = seen->median_snr,
        .reason = g_strdup(rf_droplet_fit_state_to_string(fit->state)),
    };
    g_array_append_val(results->droplets, row);
}

static void add_steps(RfResults *results, unsigned droplet, const GArray *steps)
{
    for (guint i = 0; steps && i < steps->len; i++) {
        const RfChargeStep *step = &g_array_index(steps, RfChargeStep, i);
        RfStepRow row = {
            .droplet = droplet,
            .time_s = step->time_s,
            .before_C = step->before_coulomb,
            .after_C = step->after_coulomb,
            .whole_multiples_p = -1,
        };
        g_array_append_val(results->steps, row);
    }
}

void rf_assess_droplets(RfResults *results, const RfTrail *trails, const RfDropletSet *set,
                        const RfConditions *conditions)
{
    for (size_t i = 0; i < set->n; i++) {
        const RfDropletResult *result = &set->droplets[i];
        unsigned droplet = trails[i].droplet;
        Seen seen = seen_of(results->paths, droplet);
        if (result->fit.state != RF_FIT_DONE) {
            add_unfitted(results, droplet, &result->fit, &seen);
            continue;
        }
        for (size_t s = 0; s < result->fit.spells; s++) {
            RfDropletRow row = fitted_row(droplet, &result->fit, s, conditions);
            row.median_snr = seen.median_snr;
            g_array_append_val(results->droplets, row);
        }
        add_steps(results, droplet, result->steps);
    }
}

/* ---- budget ---- */

static double median_of(GArray *values)
{
    if (values->len == 0)
        return 0;
    qsort(values->data, values->len, sizeof(double), compare_doubles);
    return g_array_index(values, double, values->len / 2);
}

static bool is_for_budget(const RfDropletRow *row)
{
    return row->accepted && fabs(row->charge_C.value) > 2 * row->charge_C.sigma;
}

static void add_budget_row(RfResults *results, const char *name, const char *stated, double relative_u,
                           GArray *charge_relative_u, bool is_common)
{
    RfBudgetRow row = {
        .input = g_strdup(name),
        .stated = g_strdup(stated),
        .relative_u = relative_u,
        .charge_relative_u = median_of(charge_relative_u),
        .charge_relative_u_mc = -1,
        .is_common = is_common,
    };
    g_array_append_val(results->budget, row);
}

/* u(q)/|q| from one input (NULL: the droplet's own, random part) of every accepted charge. */
static GArray *relative_effects(const RfResults *results, const RfTrail *trails, const RfDropletSet *set,
                                const RfCommonInput *input)
{
    GArray *effects = g_array_new(FALSE, FALSE, sizeof(double));
    size_t i = 0;
    for (guint r = 0; r < results->droplets->len; r++) {
        const RfDropletRow *row = &g_array_index(results->droplets, RfDropletRow, r);
        while (trails[i].droplet != row->droplet)
            i++;
        if (!is_for_budget(row))
            continue;
        const RfSpellFit *spell = &set->droplets[i].fit.spell[row->spell - 1];
        double u = input ? fabs(rf_conditions_effect(input, spell->charge_slope_coulomb)) : row->u_random_C;
        double relative = u / fabs(row->charge_C.value);
        g_array_append_val(effects, relative);
    }
    return effects;
}

void rf_assess_budget(RfResults *results, const RfTrail *trails, const RfDropletSet *set,
                      const RfConditions *conditions)
{
    for (guint i = 0; i < conditions->inputs->len; i++) {
        const RfCommonInput *input = g_ptr_array_index(conditions->inputs, i);
        g_autoptr(GArray) effects = relative_effects(results, trails, set, input);
        if (effects->len > 0)
            add_budget_row(results, input->name, input->stated, input->relative_u, effects, true);
    }
    g_autoptr(GArray) random = relative_effects(results, trails, set, NULL);
    if (random->len > 0)
        add_budget_row(results, "each droplet's own motion and localisation", "from its path", 0, random, false);
}

/* ---- unit ---- */

static double common_relative_u(const RfResults *results)
{
    double sum2 = 0;
    for (guint i = 0; i < results->budget->len; i++) {
        const RfBudgetRow *row = &g_array_index(results->budget, RfBudgetRow, i);
        if (row->is_common)
            sum2 += row->charge_relative_u * row->charge_relative_u;
    }
    return sqrt(sum2);
}

static void keep_unit(RfUnitResult *result, const RfChargeUnit *unit)
{
    result->resolved = unit->is_resolved;
    result->unit_C = unit->unit_coulomb;
    result->u_random_C = unit->u_random_coulomb;
    result->reason = g_strdup(unit->reason);
    result->chance = unit->chance;
    if (unit->curve_unit_coulomb) {
        result->curve_unit_C = g_array_ref(unit->curve_unit_coulomb);
        result->curve_log_likelihood = g_array_ref(unit->curve_log_likelihood);
    }
}

void rf_assess_unit(RfResults *results)
{
    g_autoptr(GArray) charges = g_array_new(FALSE, FALSE, sizeof(RfValue));
    for (guint i = 0; i < results->droplets->len; i++) {
        const RfDropletRow *row = &g_array_index(results->droplets, RfDropletRow, i);
        RfValue charge = {row->charge_C.value, row->u_random_C};
        if (row->accepted)
            g_array_append_val(charges, charge);
    }
    RfChargeUnitOptions options = RF_CHARGE_UNIT_DEFAULTS;
    options.relative_common = common_relative_u(results);
    options.wants_curve = true;
    g_autoptr(RfChargeUnit) unit =
        rf_charge_unit_find((const RfValue *)(const void *)charges->data, charges->len, &options);
    keep_unit(&results->unit, unit);
}

/* ---- the run ---- */

static bool has_charged_row(const RfResults *results)
{
    for (guint i = 0; i < results->droplets->len; i++)
        if (g_array_index(results->droplets, RfDropletRow, i).has_charge)
            return true;
    return false;
}

void rf_assess_run(RfResults *results)
{
    RfTally tally = rf_tally_droplets(results);
    results->measured = tally.droplets_accepted > 0;
    g_free(results->verdict);
    if (tally.droplets == 0)
        results->verdict = g_strdup("Nothing could be measured: no droplet was seen.");
    else if (!has_charged_row(results))
        results->verdict = g_strdup_printf(
            "No charge could be measured: the field was never on while %u droplet%s fell; radii only.",
            tally.droplets, tally.droplets == 1 ? "" : "s");
    else if (!results->measured)
        results->verdict = g_strdup_printf("Nothing could be measured: all %u droplets were set aside.", tally.droplets);
    else if (results->unit.resolved) {
        g_autofree char *unit = rf_quantity_format(results->unit.unit_C, "C");
        results->verdict = g_strdup_printf("%u of %u droplets carry whole multiples of one unit of charge, %s.",
                                           tally.droplets_accepted, tally.droplets, unit);
    } else
        results->verdict = g_strdup_printf("%u of %u droplets measured; they can't show an elementary unit: %s.",
                                           tally.droplets_accepted, tally.droplets, results->unit.reason);
}
