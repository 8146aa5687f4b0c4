#include "cli/audit_person.h"

#include "cli/audit_findings.h"
#include "physics/agreement.h"
#include "physics/constants.h"
#include "physics/drag.h"
#include "physics/velocity_charge.h"

#include <gsl/gsl_fit.h>
#include <gsl/gsl_sort.h>
#include <gsl/gsl_statistics.h>
#include <math.h>

static const double limits_coverage = 1.96, limits_confidence = 0.95;

/* A sound entry with the row that says so. */
typedef struct {
    const RfHandEntry *entry;
    const RfAuditRow *row;
    double divisions, voltage_V;
} Sound;

static GArray *sound_entries(const RfResults *results, const RfHandTimings *timings,
                             const RfAuditMatch *match)
{
    GArray *sound = g_array_new(FALSE, FALSE, sizeof(Sound));
    for (guint i = 0; i < results->audit->len; i++) {
        const RfAuditRow *row = &g_array_index(results->audit, RfAuditRow, i);
        const RfHandEntry *entry = &g_array_index(timings->entries, RfHandEntry, i);
        if (entry->problem || row->finding != rf_finding_to_string(RF_FINDING_AGREES)) continue;
        Sound one = {entry, row, rf_audit_match_divisions(match, i),
                     entry->has_voltage ? entry->voltage_V : 0};
        g_array_append_val(sound, one);
    }
    return sound;
}

static double *column_of(const GArray *sound, double (*value)(const Sound *one))
{
    double *column = g_new(double, sound->len + 1);
    for (guint i = 0; i < sound->len; i++) column[i] = value(&g_array_index(sound, Sound, i));
    return column;
}

static double difference_of(const Sound *one)
{
    return one->row->difference_s;
}

static double start_of(const Sound *one)
{
    return one->row->start_s;
}

static double stop_error_of(const Sound *one)
{
    return one->entry->start_s + one->entry->time_s - one->row->start_s - one->row->tracked_time_s.value;
}

static double start_error_of(const Sound *one)
{
    return one->entry->start_s - one->row->start_s;
}

static RfValue spread_of(const double *values, size_t n)
{
    double s = gsl_stats_sd(values, 1, n);
    return (RfValue){s, s / sqrt(2.0 * ((double)n - 1))};
}

static void describe_clock(RfPersonRow *person, const GArray *sound, const RfHandHabit *habit)
{
    person->has_clock = habit->has_clock;
    person->clock_offset_s = habit->clock_offset_s;
    g_autoptr(GArray) noted = g_array_new(FALSE, FALSE, sizeof(Sound));
    for (guint i = 0; i < sound->len; i++)
        if (g_array_index(sound, Sound, i).entry->has_start)
            g_array_append_vals(noted, &g_array_index(sound, Sound, i), 1);
    if (!habit->has_clock || noted->len < 3) {
        person->has_clock = false;
        return;
    }
    g_autofree double *starts = column_of(noted, start_error_of), *stops = column_of(noted, stop_error_of);
    person->start_spread_s = spread_of(starts, noted->len);
    person->stop_spread_s = spread_of(stops, noted->len);
}

static RfValue trend_of(const GArray *sound, const double *differences)
{
    g_autofree double *starts = column_of(sound, start_of);
    double c0, c1, cov00, cov01, cov11, rest;
    if (sound->len < 4 ||
        gsl_fit_linear(starts, 1, differences, 1, sound->len, &c0, &c1, &cov00, &cov01, &cov11, &rest) ||
        !isfinite(c1) || !isfinite(cov11))
        return (RfValue){0, 0};
    return (RfValue){60 * c1, 60 * sqrt(fmax(cov11, 0))};
}

/* v goes as 1/t: timed too long by b, it comes out too slow by b/t. Median over entries, sigma from that of b. */
static RfValue velocity_effect(const GArray *sound, RfValue bias_s)
{
    g_autofree double *shares = g_new(double, sound->len);
    for (guint i = 0; i < sound->len; i++)
        shares[i] = 1 / g_array_index(sound, Sound, i).row->tracked_time_s.value;
    gsl_sort(shares, 1, sound->len);
    double per_s = gsl_stats_median_from_sorted_data(shares, 1, sound->len);
    return (RfValue){-bias_s.value * per_s, bias_s.sigma * per_s};
}

/* ---- charges from the stopwatch alone ---- */

typedef struct {
    const RfMedium *medium;
    double step_m, spread_s;
} Bench;

/* The speed of one entry with `bias_s` taken off; sigma: the person's spread, and Brownian motion between the lines, whose
 * first-passage time scatters by sqrt(2 D t)/v. */
static RfFallAtVoltage fall_of(const Bench *bench, const Sound *one, double bias_s)
{
    double time_s = fmax(one->entry->time_s - bias_s, 0.05 * one->entry->time_s);
    double speed_m_s = one->divisions * bench->step_m / time_s;
    const double usual_radius_m = 0.5e-6;
    double diffusion_m2_s = RF_BOLTZMANN_J_K * bench->medium->temperature_kelvin /
                            rf_drag_coefficient_kg_s(bench->medium, usual_radius_m);
    double u_time_s = hypot(bench->spread_s, sqrt(2 * diffusion_m2_s * time_s) / speed_m_s);
    return (RfFallAtVoltage){
        .voltage_V = one->voltage_V,
        .fall_m_s = {one->entry->is_rise ? -speed_m_s : speed_m_s, speed_m_s * u_time_s / time_s},
    };
}

/* What belongs to one spell of one droplet: what was timed in it, and falls without a field from any time, since those
 * don't depend on the charge. */
static GArray *entries_of(const GArray *sound, const RfDropletRow *spell)
{
    GArray *chosen = g_array_new(FALSE, FALSE, sizeof(Sound));
    for (guint i = 0; i < sound->len; i++) {
        const Sound *one = &g_array_index(sound, Sound, i);
        bool is_inside = one->row->start_s >= spell->start_s && one->row->start_s <= spell->end_s;
        bool is_free = !(fabs(one->voltage_V) > 0);
        if (one->row->droplet == spell->droplet && (is_inside || is_free)) g_array_append_val(chosen, *one);
    }
    return chosen;
}

static bool charge_of(const Bench *bench, const GArray *chosen, double bias_s, RfValue *charge_C)
{
    g_autoptr(GArray) falls = g_array_new(FALSE, FALSE, sizeof(RfFallAtVoltage));
    for (guint i = 0; i < chosen->len; i++) {
        RfFallAtVoltage fall = fall_of(bench, &g_array_index(chosen, Sound, i), bias_s);
        g_array_append_val(falls, fall);
    }
    RfVelocityCharge found;
    if (falls->len == 0 ||
        !rf_velocity_charge_find(bench->medium, (const RfFallAtVoltage *)(const void *)falls->data,
                                 falls->len, &found, NULL) ||
        found.outcome != RF_VELOCITY_CHARGE_DONE)
        return false;
    *charge_C = found.charge_coulomb;
    return true;
}

static void add_charge(RfResults *results, const Bench *bench, const GArray *sound, const RfDropletRow *spell)
{
    RfHandChargeRow row = {.droplet = spell->droplet, .spell = spell->spell, .tracked_C = spell->charge_C};
    g_autoptr(GArray) chosen = entries_of(sound, spell);
    if (!charge_of(bench, chosen, 0, &row.raw_C) ||
        !charge_of(bench, chosen, results->person.bias_s.value, &row.corrected_C))
        return;
    for (guint i = 0; i < chosen->len; i++) {
        bool is_rise = g_array_index(chosen, Sound, i).entry->is_rise;
        row.rises += is_rise;
        row.falls += !is_rise;
    }
    row.label = g_strdup(g_array_index(chosen, Sound, 0).entry->label);
    g_array_append_val(results->hand_charges, row);
}

/* Relative, mean over droplets weighted by nothing but their number; sigma as the bias's. */
static void describe_charge_effect(RfResults *results)
{
    double sum = 0;
    guint n = results->hand_charges->len;
    for (guint i = 0; i < n; i++) {
        const RfHandChargeRow *row = &g_array_index(results->hand_charges, RfHandChargeRow, i);
        sum += row->raw_C.value / row->corrected_C.value - 1;
    }
    RfPersonRow *person = &results->person;
    person->has_charge_effect = n > 0 && isfinite(sum);
    if (!person->has_charge_effect) return;
    double relative_u =
        fabs(person->bias_s.value) > 0 ? person->bias_s.sigma / fabs(person->bias_s.value) : 0;
    person->charge_effect = (RfValue){sum / n, fabs(sum / n) * relative_u};
}

void rf_audit_person_describe(RfResults *results, const RfHandTimings *timings, const RfAuditMatch *match,
                              const RfMedium *medium)
{
    const RfHandHabit *habit = rf_audit_match_habit(match);
    g_autoptr(GArray) sound = sound_entries(results, timings, match);
    RfPersonRow *person = &results->person;
    *person = (RfPersonRow){
        .entries = timings->entries->len,
        .sound = sound->len,
        .unreadable = timings->unreadable,
        .bias_s = habit->bias_s,
        .spread_s = habit->spread_s,
        .is_known = sound->len >= 3,
    };
    g_array_set_size(results->hand_charges, 0);
    if (!person->is_known) return;
    g_autofree double *differences = column_of(sound, difference_of);
    rf_agreement_limits(differences, sound->len, limits_coverage, limits_confidence, &person->agreement,
                        NULL);
    person->verdict_level_s = rf_audit_match_level(habit) * hypot(habit->spread_s.value, habit->bias_s.sigma);
    person->trend_s_per_min = trend_of(sound, differences);
    person->velocity_effect = velocity_effect(sound, habit->bias_s);
    describe_clock(person, sound, habit);
    if (!medium || !results->scale.has_lines) return;
    const Bench bench = {medium, results->scale.line_step_mm * 1e-3, habit->spread_s.value};
    for (guint i = 0; i < results->droplets->len; i++)
        if (g_array_index(results->droplets, RfDropletRow, i).has_charge)
            add_charge(results, &bench, sound, &g_array_index(results->droplets, RfDropletRow, i));
    describe_charge_effect(results);
}
