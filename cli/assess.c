#include "cli/assess.h"

#include "calib/quantity.h"
#include "cli/tally.h"
#include "physics/charge_step.h"
#include "physics/charge_unit.h"
#include "physics/constants.h"
#include "physics/two_radii.h"
#include "physics/whole_multiples.h"

#include <math.h>
#include <stdlib.h>

/* A charge less certain than both of these says nothing of use; its row is kept, but set aside. The first is a quarter
 * of the elementary charge, which is about where whole multiples can no longer be told apart. */
static const double useless_sigma_coulomb = 0.25 * RF_ELEMENTARY_CHARGE_COULOMB;
static const double useless_relative_sigma = 0.1;

/* A charge further than this from its nearest whole multiple is no multiple at all. */
static const double misfit_sigmas = 4;

/* Two radii of one droplet that differ by more than chance allows once in a thousand droplets. */
static const double disagreement_p = 1e-3;

/* ---- droplets ---- */

/* "; likely: dust (it carries no charge, 0.1 e at most); nothing speaks for: evaporation (...)" */
static char *causes_text(const RfTrail *trails, const RfDropletSet *set, const RfMedium *medium,
                         size_t droplet)
{
    RfCauseEvidence causes[RF_CAUSES];
    GString *text = g_string_new(NULL);
    rf_two_radii_examine(trails, set, medium, droplet, causes);
    for (int is_for = 1; is_for >= 0; is_for--) {
        bool is_first = true;
        for (int c = 0; c < RF_CAUSES; c++) {
            if (causes[c].is_supported != (is_for == 1)) continue;
            g_string_append_printf(text, "%s%s (%s)",
                                   !is_first ? ", "
                                   : is_for  ? "; likely: "
                                             : "; nothing speaks for: ",
                                   rf_cause_to_string((RfCause)c), causes[c].evidence);
            is_first = false;
        }
    }
    for (int c = 0; c < RF_CAUSES; c++) g_free(causes[c].evidence);
    return g_string_free(text, FALSE);
}

static char *why_set_aside(const RfDropletFit *fit, const RfSpellFit *spell, const RfFieldTimeline *timeline,
                           double u_charge_coulomb)
{
    double charge_coulomb = fabs(spell->charge_coulomb.value);
    if (!spell->has_charge && timeline->switches->len == 0 && !timeline->has_log)
        return g_strdup("no field was seen to act: it was off, or nothing in view was charged: radius only");
    if (!spell->has_charge) return g_strdup("no field was on while it was watched: radius only");
    if (rf_field_timeline_is_doubtful(timeline, fit->spell[0].start_s, fit->spell[fit->spells - 1].end_s))
        return g_strdup("which state the field was in while it was watched can't be told for sure: another "
                        "reading of the "
                        "motion is likelier than 1 in 1000");
    if (fit->radius_agreement_p < disagreement_p) {
        g_autofree char *fall = rf_quantity_format(
            (RfValue){fit->radius_fall_m.value * 1e6, fit->radius_fall_m.sigma * 1e6}, "um");
        g_autofree char *spread = rf_quantity_format(
            (RfValue){fit->radius_spread_m.value * 1e6, fit->radius_spread_m.sigma * 1e6}, "um");
        return g_strdup_printf(
            "the two radii disagree beyond chance: %s from the fall, %s from the spread (p = %.1g)", fall,
            spread, fit->radius_agreement_p);
    }
    if (u_charge_coulomb > useless_sigma_coulomb &&
        u_charge_coulomb > useless_relative_sigma * charge_coulomb)
        return g_strdup_printf("charge too uncertain: u = %.2g C, seen with a field on for %.1f s of %.1f s",
                               u_charge_coulomb, spell->on_s, spell->end_s - spell->start_s);
    return g_strdup("");
}

static RfValue scaled(RfValue value, double factor)
{
    return (RfValue){value.value * factor, value.sigma * factor};
}

static void name_whole_multiple(RfDropletRow *row)
{
    RfWholeMultiple multiple = rf_whole_multiples_nearest(row->charge_C);
    row->units_probability = multiple.probability;
    /* The nearest multiple may be the only candidate and still not fit. */
    row->has_units = multiple.probability >= 0.95 && fabs(multiple.deviation) < misfit_sigmas;
    row->units = row->has_units ? multiple.n : 0;
}

static RfChargeEstimate estimate_of(const RfDropletFit *fit, const RfSpellFit *spell)
{
    return (RfChargeEstimate){fit->radius_m,          spell->charge_coulomb,     fit->spread_share,
                              spell->fall_leak_per_v, fit->evaporation_radius_m, spell->evaporation_coulomb};
}

/* Random and common parts in one sigma, first order; and what each line does. */
static bool charge_with_common(const RfChargeInputs *inputs, const RfChargeEstimate *estimate,
                               RfValue *charge, double *influences_coulomb, GError **error)
{
    const RfBudgetOptions first_order = {.coverage = 0.95};
    g_autoptr(RfBudget) budget = rf_charge_budget_new(inputs, estimate, &first_order, NULL, error);
    if (!budget) return false;
    *charge = (RfValue){estimate->charge_coulomb.value, budget->sigma};
    for (size_t line = 0; line < budget->n; line++)
        influences_coulomb[line] = budget->parts[line].contribution;
    return true;
}

static bool radius_with_common(const RfChargeInputs *inputs, const RfChargeEstimate *estimate,
                               RfValue *radius, GError **error)
{
    const RfBudgetOptions first_order = {.coverage = 0.95};
    g_autoptr(RfBudget) budget = rf_charge_budget_radius_new(inputs, estimate, &first_order, NULL, error);
    if (budget) *radius = (RfValue){estimate->radius_m.value, budget->sigma};
    return budget != NULL;
}

static bool fitted_row(unsigned droplet, const RfDropletFit *fit, size_t s, const RfFieldTimeline *timeline,
                       const RfChargeInputs *inputs, RfDropletRow *row, RfInfluenceRow *influence,
                       GError **error)
{
    const RfSpellFit *spell = &fit->spell[s];
    const RfChargeEstimate estimate = estimate_of(fit, spell);
    RfValue radius_m, charge_coulomb = {0};
    if (!radius_with_common(inputs, &estimate, &radius_m, error) ||
        (spell->has_charge &&
         !charge_with_common(inputs, &estimate, &charge_coulomb, influence->charge_C, error)))
        return false;
    *row = (RfDropletRow){
        .droplet = droplet,
        .spell = (unsigned)s + 1,
        .start_s = spell->start_s,
        .end_s = spell->end_s,
        .frames = (unsigned)spell->samples,
        .fall_mm_s = {fit->fall_m_s.value * 1e3,
                      hypot(fit->fall_m_s.sigma, fit->fall_m_s.value * inputs->scale_relative_u) * 1e3},
        .radius_um = scaled(radius_m, 1e6),
        .radius_fall_um = scaled(fit->radius_fall_m, 1e6),
        .radius_spread_um = scaled(fit->radius_spread_m, 1e6),
        .radius_agreement_p = fit->radius_agreement_p,
        .has_charge = spell->has_charge,
        .charge_C = charge_coulomb,
        .u_random_C = spell->has_charge ? spell->charge_coulomb.sigma : 0,
        .reason = why_set_aside(fit, spell, timeline, charge_coulomb.sigma),
    };
    row->accepted = *row->reason == '\0';
    if (row->has_charge) name_whole_multiple(row);
    return true;
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

/* Rows are sorted by droplet; `at` is this droplet's first row, and the next one's afterwards. */
static Seen seen_of(const GArray *paths, unsigned droplet, guint *at)
{
    g_autoptr(GArray) snr = g_array_new(FALSE, FALSE, sizeof(double));
    Seen seen = {0};
    for (; *at < paths->len && g_array_index(paths, RfPathRow, *at).droplet == droplet; (*at)++) {
        const RfPathRow *row = &g_array_index(paths, RfPathRow, *at);
        if (!row->seen) continue;
        if (seen.frames++ == 0) seen.start_s = row->time_s;
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
            .change_C = step->change_coulomb,
            .whole_multiples_p = -1,
        };
        g_array_append_val(results->steps, row);
    }
}

static bool add_fitted(RfResults *results, unsigned droplet, const RfDropletFit *fit, double median_snr,
                       const RfFieldTimeline *timeline, const RfChargeInputs *inputs, GError **error)
{
    for (size_t s = 0; s < fit->spells; s++) {
        RfDropletRow row;
        RfInfluenceRow influence = {.droplet = droplet, .spell = (unsigned)s + 1};
        if (!fitted_row(droplet, fit, s, timeline, inputs, &row, &influence, error)) {
            g_prefix_error(error, "droplet %u, spell %zu: ", droplet, s + 1);
            return false;
        }
        row.median_snr = median_snr;
        g_array_append_val(results->droplets, row);
        if (row.has_charge) g_array_append_val(results->influences, influence);
    }
    return true;
}

/* A disagreement of the two radii gets its possible causes beside it. */
static void add_causes(RfResults *results, guint first_row, const RfTrail *trails, const RfDropletSet *set,
                       const RfChargeInputs *inputs, size_t droplet)
{
    const RfMedium medium = rf_charge_budget_medium(inputs);
    g_autofree char *causes = causes_text(trails, set, &medium, droplet);
    for (guint r = first_row; r < results->droplets->len; r++) {
        RfDropletRow *row = &g_array_index(results->droplets, RfDropletRow, r);
        if (row->accepted || !g_str_has_prefix(row->reason, "the two radii disagree")) continue;
        char *longer = g_strconcat(row->reason, causes, NULL);
        g_free(row->reason);
        row->reason = longer;
    }
}

bool rf_assess_droplets(RfResults *results, const RfTrail *trails, const RfDropletSet *set,
                        const RfChargeInputs *inputs, GError **error)
{
    guint next_path_row = 0;
    for (size_t i = 0; i < set->n; i++) {
        const RfDropletResult *result = &set->droplets[i];
        Seen seen = seen_of(results->paths, trails[i].droplet, &next_path_row);
        guint first_row = results->droplets->len;
        if (result->fit.state != RF_FIT_DONE)
            add_unfitted(results, trails[i].droplet, &result->fit, &seen);
        else if (!add_fitted(results, trails[i].droplet, &result->fit, seen.median_snr, set->timeline, inputs,
                             error))
            return false;
        if (result->fit.state == RF_FIT_DONE && result->fit.radius_agreement_p < disagreement_p)
            add_causes(results, first_row, trails, set, inputs, i);
        add_steps(results, trails[i].droplet, result->steps);
    }
    return true;
}

/* ---- budget ---- */

typedef struct {
    double relative_u;
    const RfDropletFit *fit;
    const RfSpellFit *spell;
} Candidate;

static int compare_candidates(const void *a, const void *b)
{
    return compare_doubles(&((const Candidate *)a)->relative_u, &((const Candidate *)b)->relative_u);
}

/* Accepted spells with a charge that stands out from zero, in order of their relative uncertainty. */
static GArray *candidates_of(const RfResults *results, const RfTrail *trails, const RfDropletSet *set)
{
    GArray *candidates = g_array_new(FALSE, FALSE, sizeof(Candidate));
    size_t i = 0;
    for (guint r = 0; r < results->droplets->len; r++) {
        const RfDropletRow *row = &g_array_index(results->droplets, RfDropletRow, r);
        while (trails[i].droplet != row->droplet) i++;
        if (!row->accepted || fabs(row->charge_C.value) < 2 * row->charge_C.sigma) continue;
        const RfDropletFit *fit = &set->droplets[i].fit;
        Candidate candidate = {row->charge_C.sigma / fabs(row->charge_C.value), fit,
                               &fit->spell[row->spell - 1]};
        g_array_append_val(candidates, candidate);
    }
    g_array_sort(candidates, compare_candidates);
    return candidates;
}

static void add_budget_row(RfResults *results, const RfChargeInputs *inputs, int line,
                           const RfBudgetInput *input, const RfBudgetPart *part, double charge_coulomb)
{
    RfBudgetRow row = {
        .input = g_strdup(rf_charge_line_to_string((RfChargeLine)line)),
        .stated = rf_conditions_stated(inputs, (RfChargeLine)line),
        .relative_u = input->value != 0 ? input->sigma / fabs(input->value) : 0,
        .charge_relative_u = fabs(part->contribution) / charge_coulomb,
        .charge_relative_u_mc = part->mc_sigma < 0 ? -1 : part->mc_sigma / charge_coulomb,
        .is_common = line != RF_CHARGE_LINE_PATH,
    };
    g_array_append_val(results->budget, row);
}

bool rf_assess_budget(RfResults *results, const RfTrail *trails, const RfDropletSet *set,
                      const RfChargeInputs *inputs, GError **error)
{
    g_autoptr(GArray) candidates = candidates_of(results, trails, set);
    if (candidates->len == 0) return true;
    const Candidate *typical = &g_array_index(candidates, Candidate, candidates->len / 2);
    const RfChargeEstimate estimate = estimate_of(typical->fit, typical->spell);
    RfBudgetInput lines[RF_CHARGE_LINES];
    g_autoptr(RfBudget) budget = rf_charge_budget_new(inputs, &estimate, &RF_BUDGET_DEFAULTS, lines, error);
    if (!budget) return false;
    for (int line = 0; line < RF_CHARGE_LINES; line++)
        if (lines[line].sigma > 0)
            add_budget_row(results, inputs, line, &lines[line], &budget->parts[line],
                           fabs(estimate.charge_coulomb.value));
    return true;
}

/* ---- unit ---- */

static double common_relative_u(const RfResults *results)
{
    double sum2 = 0;
    for (guint i = 0; i < results->budget->len; i++) {
        const RfBudgetRow *row = &g_array_index(results->budget, RfBudgetRow, i);
        if (row->is_common) sum2 += row->charge_relative_u * row->charge_relative_u;
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

/* A change of charge should be a whole multiple of the unit that all charges show. */
static void test_steps(RfResults *results)
{
    for (guint i = 0; results->unit.resolved && i < results->steps->len; i++) {
        RfStepRow *row = &g_array_index(results->steps, RfStepRow, i);
        const RfChargeStep step = {.change_coulomb = row->change_C};
        row->whole_multiples_p = rf_charge_step_whole_multiples_p(&step, results->unit.unit_C.value);
    }
}

void rf_assess_unit(RfResults *results)
{
    g_autoptr(GArray) charges = g_array_new(FALSE, FALSE, sizeof(RfValue));
    for (guint i = 0; i < results->droplets->len; i++) {
        const RfDropletRow *row = &g_array_index(results->droplets, RfDropletRow, i);
        RfValue charge = {row->charge_C.value, row->u_random_C};
        if (row->accepted) g_array_append_val(charges, charge);
    }
    RfChargeUnitOptions options = RF_CHARGE_UNIT_DEFAULTS;
    options.relative_common = common_relative_u(results);
    options.wants_curve = true;
    g_autoptr(RfChargeUnit) unit =
        rf_charge_unit_find((const RfValue *)(const void *)charges->data, charges->len, &options);
    keep_unit(&results->unit, unit);
    test_steps(results);
}

/* ---- the run ---- */

static bool has_charged_row(const RfResults *results)
{
    for (guint i = 0; i < results->droplets->len; i++)
        if (g_array_index(results->droplets, RfDropletRow, i).has_charge) return true;
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
        results->verdict = g_strdup_printf("No charge could be measured: no field was seen to act on the %u "
                                           "droplet%s in view. It was off, or none was "
                                           "charged: a voltage log would tell. Radii only.",
                                           tally.droplets, tally.droplets == 1 ? "" : "s");
    else if (!results->measured)
        results->verdict =
            g_strdup_printf("Nothing could be measured: all %u droplets were set aside.", tally.droplets);
    else if (results->unit.resolved) {
        g_autofree char *unit = rf_quantity_format(results->unit.unit_C, "C");
        results->verdict =
            g_strdup_printf("%u of %u droplets carry whole multiples of one unit of charge, %s.",
                            tally.droplets_accepted, tally.droplets, unit);
    } else
        results->verdict =
            g_strdup_printf("%u of %u droplets measured; they can't show an elementary unit: %s.",
                            tally.droplets_accepted, tally.droplets, results->unit.reason);
}
