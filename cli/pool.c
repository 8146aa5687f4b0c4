#include "cli/pool.h"

#include <math.h>
#include <string.h>

#include "calib/quantity.h"
#include "cli/pool_check.h"
#include "cli/tally.h"
#include "physics/pooled_unit.h"

/* Fewer trials than for one recording: enough for the chance of 0.01 that is needed, and charges may be thousands. */
enum { TRIALS = 99 };

static const double SURELY_OFF_P = 0.01;

/* ---- which measurement is whose ---- */

typedef struct {
    const char *input, *name; /* borrowed; name NULL: one recording's own */
} Measurement;

typedef struct {
    GPtrArray *recordings;
    GArray *measurements;      /* Measurement */
    RfPooledRecording *pooled; /* one per recording */
} Join;

static size_t measurement_of(GHashTable *known, GArray *measurements, const RfPoolInput *input)
{
    g_autofree char *key = g_strconcat(input->input, "\n", input->shared, NULL);
    void *held;
    if (input->shared && g_hash_table_lookup_extended(known, key, NULL, &held)) return GPOINTER_TO_SIZE(held);
    const Measurement measurement = {input->input, input->shared};
    g_array_append_val(measurements, measurement);
    if (input->shared)
        g_hash_table_insert(known, g_steal_pointer(&key), GSIZE_TO_POINTER(measurements->len - 1));
    return measurements->len - 1;
}

static void number_measurements(Join *join)
{
    g_autoptr(GHashTable) known = g_hash_table_new_full(g_str_hash, g_str_equal, g_free, NULL);
    for (guint r = 0; r < join->recordings->len; r++) {
        const RfPoolRecording *recording = join->recordings->pdata[r];
        size_t *numbers = g_new(size_t, recording->inputs->len + 1);
        for (guint k = 0; k < recording->inputs->len; k++)
            numbers[k] =
                measurement_of(known, join->measurements, &g_array_index(recording->inputs, RfPoolInput, k));
        join->pooled[r].measurements = numbers;
        join->pooled[r].n_inputs = recording->inputs->len;
    }
}

/* Accepted charges, and what each input does to them. */
static void gather_charges(const RfPoolRecording *recording, RfPooledRecording *pooled)
{
    const size_t inputs = recording->inputs->len;
    RfValue *charges = g_new(RfValue, recording->droplets->len + 1);
    double *influences = g_new(double, recording->droplets->len *inputs + 1);
    for (guint i = 0; i < recording->droplets->len; i++) {
        const RfDropletRow *row = &g_array_index(recording->droplets, RfDropletRow, i);
        if (!row->accepted || !row->has_charge) continue;
        charges[pooled->n] = (RfValue){row->charge_C.value, row->u_random_C};
        for (size_t k = 0; k < inputs; k++)
            influences[pooled->n * inputs + k] =
                g_array_index(recording->influences_C, double, i *inputs + k);
        pooled->n++;
    }
    pooled->charges_coulomb = charges;
    pooled->influences_coulomb = influences;
}

static void join_open(Join *join, GPtrArray *recordings)
{
    join->recordings = recordings;
    join->measurements = g_array_new(FALSE, FALSE, sizeof(Measurement));
    join->pooled = g_new0(RfPooledRecording, recordings->len + 1);
    number_measurements(join);
    for (guint r = 0; r < recordings->len; r++) gather_charges(recordings->pdata[r], &join->pooled[r]);
}

static void join_close(Join *join)
{
    for (guint r = 0; r < join->recordings->len; r++) {
        g_free((void *)join->pooled[r].measurements);
        g_free((void *)join->pooled[r].charges_coulomb);
        g_free((void *)join->pooled[r].influences_coulomb);
    }
    g_free(join->pooled);
    g_array_unref(join->measurements);
}

/* ---- rows ---- */

/* Numbered through all recordings; a droplet's spells keep together. */
static void add_droplets(RfResults *results, const RfPoolRecording *recording, guint r, unsigned *number)
{
    unsigned before = 0;
    for (guint i = 0; i < recording->droplets->len; i++) {
        RfDropletRow row = g_array_index(recording->droplets, RfDropletRow, i);
        if (i == 0 || row.droplet_there != before) (*number)++;
        before = row.droplet_there;
        row.recording = r;
        row.droplet = *number;
        row.reason = g_strdup(row.reason);
        g_array_append_val(results->droplets, row);
    }
}

static void count_droplets(const GArray *droplets, RfRecordingRow *row)
{
    RfResults counted = {.droplets = (GArray *)droplets};
    const RfTally tally = rf_tally_droplets(&counted);
    row->droplets_accepted = tally.droplets_accepted;
    row->droplets_set_aside = tally.droplets - tally.droplets_accepted;
}

static void take_part(const RfPooledPart *part, RfRecordingRow *row)
{
    row->stands_alone = part->basis == RF_POOLED_ALONE;
    row->unit_C = part->unit_coulomb;
    row->u_random_C = part->u_random_coulomb;
    row->weight = part->weight;
    row->offset = part->offset;
    row->deviate = part->deviate;
    row->deviate_p = part->p;
    row->without_C = part->without_coulomb;
}

static char *why_silent(const RfPoolRecording *recording, const RfPooledUnit *unit, size_t charges)
{
    if (charges == 0) return g_strdup(recording->verdict ? recording->verdict : "no accepted charge");
    if (!unit->is_resolved) return g_strdup("no unit was found that it could be held to");
    return g_strdup("its charges fit so many multiples that they say nothing of the unit");
}

static void add_recording(RfResults *results, const Join *join, guint r, const RfPooledUnit *unit)
{
    const RfPoolRecording *recording = join->recordings->pdata[r];
    const size_t charges = join->pooled[r].n;
    RfRecordingRow row = {
        .name = g_strdup(recording->name), .sheet = g_strdup(recording->sheet), .deviate_p = 1};
    count_droplets(recording->droplets, &row);
    if (unit->parts[r].basis != RF_POOLED_NONE) {
        row.state = RF_RECORDING_POOLED;
        row.reason = g_strdup("");
        take_part(&unit->parts[r], &row);
    } else {
        row.state = charges > 0 ? RF_RECORDING_SILENT : RF_RECORDING_EMPTY;
        row.reason = why_silent(recording, unit, charges);
    }
    g_array_append_val(results->recordings, row);
}

/* Its files by digest, so that the pool names exactly what it was made from. */
static void add_files(RfResults *results, const RfPoolRecording *recording)
{
    for (guint i = 0; i < recording->videos->len; i++) {
        const RfInputFile file = {g_strdup(recording->name), g_strdup(recording->folder),
                                  g_strdup(recording->videos->pdata[i])};
        g_array_append_val(results->inputs, file);
    }
}

static void add_failures(RfResults *results, const GArray *failures)
{
    for (guint i = 0; i < failures->len; i++) {
        const RfPoolFailure *failure = &g_array_index(failures, RfPoolFailure, i);
        const RfRecordingRow row = {.name = g_strdup(failure->name),
                                    .state = RF_RECORDING_FAILED,
                                    .reason = g_strdup(failure->reason),
                                    .deviate_p = 1};
        g_array_append_val(results->recordings, row);
    }
}

/* ---- budget of the unit ---- */

static guint count_holders(const Join *join, size_t measurement)
{
    guint holders = 0;
    for (guint r = 0; r < join->recordings->len; r++)
        for (size_t k = 0; k < join->pooled[r].n_inputs; k++)
            holders += join->pooled[r].measurements[k] == measurement;
    return holders;
}

static RfMeasurementRow *row_of_own(RfResults *results, const char *input)
{
    for (guint i = 0; i < results->measurements->len; i++) {
        RfMeasurementRow *row = &g_array_index(results->measurements, RfMeasurementRow, i);
        if (!row->name && strcmp(row->input, input) == 0) return row;
    }
    return NULL;
}

/* What recordings have each of their own of one input adds up in quadrature. */
static void add_measurement(RfResults *results, const Measurement *measurement, guint holders,
                            double relative_u)
{
    RfMeasurementRow *own = measurement->name ? NULL : row_of_own(results, measurement->input);
    if (own) {
        own->recordings += holders;
        own->unit_relative_u = hypot(own->unit_relative_u, relative_u);
        return;
    }
    const RfMeasurementRow row = {g_strdup(measurement->input), g_strdup(measurement->name), holders,
                                  fabs(relative_u)};
    g_array_append_val(results->measurements, row);
}

static int by_size(const void *left, const void *right)
{
    const double a = ((const RfMeasurementRow *)left)->unit_relative_u,
                 b = ((const RfMeasurementRow *)right)->unit_relative_u;
    return (a < b) - (a > b);
}

/* The same as lines of a budget, for figure and report. */
static void add_budget(RfResults *results, const RfPooledUnit *unit)
{
    for (guint i = 0; i < results->measurements->len; i++) {
        const RfMeasurementRow *from = &g_array_index(results->measurements, RfMeasurementRow, i);
        if (!(from->unit_relative_u > 1e-7)) continue;
        const RfBudgetRow row = {
            .input = g_strconcat(from->input, from->name ? ": " : "", from->name, NULL),
            .stated =
                g_strdup_printf(from->name ? "one measurement for %u recording%s" : "%u, one per recording",
                                from->recordings, from->recordings == 1 ? "" : "s"),
            .charge_relative_u = from->unit_relative_u,
            .charge_relative_u_mc = -1,
            .is_common = from->name != NULL && from->recordings > 1,
        };
        g_array_append_val(results->budget, row);
    }
    const RfBudgetRow droplets = {
        .input = g_strdup("the droplets' own paths"),
        .stated = g_strdup("from their paths"),
        .charge_relative_u = unit->u_random_coulomb / unit->unit_coulomb.value,
        .charge_relative_u_mc = -1,
    };
    g_array_append_val(results->budget, droplets);
}

static void add_measurements(RfResults *results, const Join *join, const RfPooledUnit *unit)
{
    for (guint k = 0; k < join->measurements->len && unit->is_resolved; k++)
        add_measurement(results, &g_array_index(join->measurements, Measurement, k), count_holders(join, k),
                        unit->measurement_relative[k]);
    g_array_sort(results->measurements, by_size);
    if (unit->is_resolved) add_budget(results, unit);
}

/* ---- what it comes to ---- */

static void keep_unit(RfResults *results, const RfPooledUnit *unit)
{
    RfUnitResult *kept = &results->unit;
    kept->resolved = unit->is_resolved;
    kept->unit_C = unit->is_resolved ? unit->unit_coulomb : unit->search->unit_coulomb;
    kept->u_random_C = unit->is_resolved ? unit->u_random_coulomb : unit->search->u_random_coulomb;
    kept->reason = g_strdup(unit->search->reason);
    kept->chance = unit->search->chance;
    if (unit->search->curve_unit_coulomb) {
        g_array_unref(kept->curve_unit_C);
        g_array_unref(kept->curve_log_likelihood);
        kept->curve_unit_C = g_array_ref(unit->search->curve_unit_coulomb);
        kept->curve_log_likelihood = g_array_ref(unit->search->curve_log_likelihood);
    }
    results->agreement = (RfAgreementOfRecordings){unit->used, unit->chi_squared, unit->p,
                                                   (unsigned)unit->most_off, unit->most_off_p};
}

/* A recording that is off isn't dropped: what went wrong in it decides that, not its value. */
static void warn_of_disagreement(RfResults *results, const RfPooledUnit *unit)
{
    if (!unit->is_resolved || unit->used < 2) return;
    const RfRecordingRow *row = &g_array_index(results->recordings, RfRecordingRow, unit->most_off);
    if (unit->most_off_p < SURELY_OFF_P) {
        g_autofree char *without = rf_quantity_format(row->without_C, "C");
        rf_results_warn(
            results,
            "%s is off: its unit lies %.2g %% (%.1f standard uncertainties) from what the others let expect, "
            "by "
            "chance as far in %u recordings: %.2g. Without it the unit is %s. Find out what differs before "
            "using either",
            row->name, 100 * row->offset.value, fabs(row->deviate), unit->used, unit->most_off_p, without);
    } else if (unit->p < SURELY_OFF_P)
        rf_results_warn(results,
                        "the recordings' units differ more than their uncertainties allow: chi-squared %.1f "
                        "for %u degrees "
                        "of freedom, p = %.1g; no single one stands out",
                        unit->chi_squared, unit->used - 1, unit->p);
}

static void warn_of_absent(RfResults *results)
{
    for (guint i = 0; i < results->recordings->len; i++) {
        const RfRecordingRow *row = &g_array_index(results->recordings, RfRecordingRow, i);
        if (row->state == RF_RECORDING_FAILED)
            rf_results_warn(results, "%s has no result: %s", row->name, row->reason);
        else if (row->state == RF_RECORDING_EMPTY)
            rf_results_warn(results, "%s adds nothing: %s", row->name, row->reason);
    }
}

static void conclude(RfResults *results)
{
    const RfTally tally = rf_tally_droplets(results);
    const guint all = results->recordings->len;
    results->measured = tally.droplets_accepted > 0;
    g_autofree char *unit = rf_quantity_format(results->unit.unit_C, "C");
    if (!results->measured)
        results->verdict = g_strdup_printf("Nothing to pool: no droplet was accepted in %u recording%s.", all,
                                           all == 1 ? "" : "s");
    else if (results->unit.resolved)
        results->verdict = g_strdup_printf(
            "%u droplets of %u recording%s carry whole multiples of one unit of charge, %s.",
            tally.droplets_accepted, results->agreement.used, results->agreement.used == 1 ? "" : "s", unit);
    else
        results->verdict =
            g_strdup_printf("%u droplets of %u recordings together can't show an elementary unit: %s.",
                            tally.droplets_accepted, all, results->unit.reason);
}

static RfResults *results_of(const Join *join, const GArray *failures, const RfPooledUnit *unit)
{
    RfResults *results = rf_results_new();
    unsigned droplets = 0;
    keep_unit(results, unit);
    for (guint r = 0; r < join->recordings->len; r++) {
        add_droplets(results, join->recordings->pdata[r], r, &droplets);
        add_recording(results, join, r, unit);
        add_files(results, join->recordings->pdata[r]);
    }
    add_failures(results, failures);
    add_measurements(results, join, unit);
    warn_of_disagreement(results, unit);
    rf_pool_check_alike(join->recordings, results);
    warn_of_absent(results);
    results->recording_summary = g_strdup_printf("%u recordings", results->recordings->len);
    conclude(results);
    return results;
}

RfResults *rf_pool_join(GPtrArray *recordings, const GArray *failures, GError **error)
{
    if (!rf_pool_check_twice(recordings, error) || !rf_pool_check_shared(recordings, error)) return NULL;
    rf_pool_check_names(recordings);
    Join join;
    join_open(&join, recordings);
    g_autoptr(RfPooledUnit) unit =
        rf_pooled_unit_new(join.pooled, recordings->len, join.measurements->len, TRIALS, error);
    RfResults *results = unit ? results_of(&join, failures, unit) : NULL;
    join_close(&join);
    return results;
}
