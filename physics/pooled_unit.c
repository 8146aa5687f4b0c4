#include "physics/pooled_unit.h"

#include <math.h>

#include "physics/charge_comb.h"
#include "physics/common_mean.h"
#include "physics/recording_unit.h"

enum { PASSES = 4 }; /* of reading open recordings with what the others say; two settle it */

const char *rf_pooled_basis_to_string(RfPooledBasis basis)
{
    static const char *const names[] = {"none", "together", "alone"};
    return names[basis];
}

/* What is being worked out, one of each per recording. */
typedef struct {
    const RfPooledRecording *recordings;
    size_t n, n_measurements;
    RfCombCharge **charges;
    double *influence; /* n x n_measurements: of each recording's unit, relative */
    double *common;    /* n x n: relative covariance */
    RfValue *x;        /* own unit over the nearby one, less 1; sigma random */
    RfPooledBasis *basis;
} Pool;

/* ---- is there a unit, and which ---- */

static bool *shared_by_all(const RfPooledRecording *recordings, size_t n, size_t n_measurements)
{
    g_autofree size_t *holders = g_new0(size_t, n_measurements + 1);
    size_t with_charges = 0;
    for (size_t r = 0; r < n; r++) {
        with_charges += recordings[r].n > 0;
        for (size_t k = 0; k < recordings[r].n_inputs && recordings[r].n > 0; k++)
            holders[recordings[r].measurements[k]]++;
    }
    bool *is_shared = g_new0(bool, n_measurements + 1);
    for (size_t k = 0; k < n_measurements; k++) is_shared[k] = holders[k] == with_charges;
    return is_shared;
}

/* An error that all share moves the unit and hides nothing; what a recording has for itself blurs the comb. */
static RfValue blurred(const RfPooledRecording *recording, size_t i, const bool *is_shared)
{
    RfValue charge = recording->charges_coulomb[i];
    for (size_t k = 0; k < recording->n_inputs; k++)
        if (!is_shared[recording->measurements[k]])
            charge.sigma = hypot(charge.sigma, recording->influences_coulomb[i * recording->n_inputs + k]);
    return charge;
}

static RfChargeUnit *search(const RfPooledRecording *recordings, size_t n, size_t n_measurements,
                            unsigned trials)
{
    g_autofree bool *is_shared = shared_by_all(recordings, n, n_measurements);
    g_autoptr(GArray) charges = g_array_new(false, false, sizeof(RfValue));
    for (size_t r = 0; r < n; r++)
        for (size_t i = 0; i < recordings[r].n; i++) {
            const RfValue charge = blurred(&recordings[r], i, is_shared);
            g_array_append_val(charges, charge);
        }
    RfChargeUnitOptions options = RF_CHARGE_UNIT_DEFAULTS;
    options.trials = trials;
    options.wants_curve = true;
    return rf_charge_unit_find((const RfValue *)(const void *)charges->data, charges->len, &options);
}

/* ---- covariance ---- */

/* d ln(unit)/dz = sum of q * influence / sigma^2 over sum of q^2 / sigma^2: least squares on known multiples, with
 * charges in their place, so that it doesn't hang on the multiples. */
static void weigh_influences(const Pool *pool, size_t r)
{
    const RfPooledRecording *recording = &pool->recordings[r];
    double information = 0.0;
    for (size_t i = 0; i < recording->n; i++) {
        const RfCombCharge *charge = &pool->charges[r][i];
        const double weight = (1.0 - charge->neutral_probability) * charge->coulomb /
                              (charge->sigma_coulomb * charge->sigma_coulomb);
        information += weight * charge->coulomb;
        for (size_t k = 0; k < recording->n_inputs; k++)
            pool->influence[r * pool->n_measurements + recording->measurements[k]] +=
                weight * recording->influences_coulomb[i * recording->n_inputs + k];
    }
    for (size_t k = 0; k < pool->n_measurements && information > 0.0; k++)
        pool->influence[r * pool->n_measurements + k] /= information;
}

static void fill_covariance(const Pool *pool)
{
    for (size_t r = 0; r < pool->n; r++) weigh_influences(pool, r);
    for (size_t r = 0; r < pool->n; r++)
        for (size_t s = 0; s <= r; s++) {
            double sum = 0.0;
            for (size_t k = 0; k < pool->n_measurements; k++)
                sum += pool->influence[r * pool->n_measurements + k] *
                       pool->influence[s * pool->n_measurements + k];
            pool->common[r * pool->n + s] = pool->common[s * pool->n + r] = sum;
        }
}

/* What a recording doesn't share with all others, for a first prior. */
static double own_variance(const Pool *pool, size_t r, const bool *is_shared)
{
    double sum = 0.0;
    for (size_t k = 0; k < pool->n_measurements; k++) {
        const double influence = pool->influence[r * pool->n_measurements + k];
        if (!is_shared[k]) sum += influence * influence;
    }
    return sum;
}

/* ---- each recording's own unit ---- */

static void read_alone(Pool *pool, double nearby_coulomb)
{
    for (size_t r = 0; r < pool->n; r++)
        if (rf_recording_unit_alone(pool->charges[r], pool->recordings[r].n, nearby_coulomb, &pool->x[r]))
            pool->basis[r] = RF_POOLED_ALONE;
}

static void read_given(Pool *pool, size_t r, double nearby_coulomb, RfValue prior)
{
    const bool tells =
        rf_recording_unit_given(pool->charges[r], pool->recordings[r].n, nearby_coulomb, prior, &pool->x[r]);
    pool->basis[r] = tells ? RF_POOLED_TOGETHER : RF_POOLED_NONE;
}

/* The mean of those with a basis; `with_open` adds the others as if known to 100 %, which tells nothing but has an offset:
 * what all let expect of them. `rows` names the recordings. */
static RfCommonMean *mean_of(const Pool *pool, bool with_open, size_t *rows, GError **error)
{
    g_autofree double *values = g_new(double, pool->n + 1), *own = g_new(double, pool->n + 1);
    size_t m = 0;
    for (size_t r = 0; r < pool->n; r++) {
        const bool is_open = pool->basis[r] == RF_POOLED_NONE;
        if (is_open && !with_open) continue;
        values[m] = is_open ? 0.0 : pool->x[r].value;
        own[m] = is_open ? 1.0 : pool->x[r].sigma;
        rows[m++] = r;
    }
    g_autofree double *common = g_new(double, m *m + 1);
    for (size_t i = 0; i < m; i++)
        for (size_t j = 0; j < m; j++) common[i * m + j] = pool->common[rows[i] * pool->n + rows[j]];
    return rf_common_mean_new(values, own, common, m, error);
}

static size_t count_used(const Pool *pool)
{
    size_t used = 0;
    for (size_t r = 0; r < pool->n; r++) used += pool->basis[r] != RF_POOLED_NONE;
    return used;
}

/* Before anything is known of the others: what the search says, and what the recording doesn't share. */
static void read_first(Pool *pool, const RfChargeUnit *found, const bool *is_open)
{
    g_autofree bool *is_shared = shared_by_all(pool->recordings, pool->n, pool->n_measurements);
    const double nearby_coulomb = found->unit_coulomb.value;
    const double searched = found->u_random_coulomb / nearby_coulomb;
    for (size_t r = 0; r < pool->n; r++) {
        const RfValue prior = {0.0, sqrt(searched * searched + own_variance(pool, r, is_shared))};
        if (is_open[r]) read_given(pool, r, nearby_coulomb, prior);
    }
}

/* Once more, each with what the others let expect of it: its offset, its own charges taken out of it. */
static bool read_again(Pool *pool, double nearby_coulomb, const bool *is_open, GError **error)
{
    g_autofree size_t *rows = g_new(size_t, pool->n + 1);
    g_autoptr(RfCommonMean) mean = mean_of(pool, true, rows, error);
    if (mean == NULL) return false;
    for (size_t r = 0; r < pool->n; r++) { /* all are in it, in order */
        const RfValue offset = mean->parts[r].offset;
        const bool has_own = pool->basis[r] != RF_POOLED_NONE;
        const double value = has_own ? pool->x[r].value : 0.0, own = has_own ? pool->x[r].sigma : 1.0;
        if (!is_open[r] || count_used(pool) < (has_own ? 2 : 1)) continue;
        const RfValue prior = {value - offset.value,
                               sqrt(fmax(offset.sigma * offset.sigma - own * own, 1e-10))};
        read_given(pool, r, nearby_coulomb, prior);
    }
    return true;
}

static bool read_open(Pool *pool, const RfChargeUnit *found, GError **error)
{
    g_autofree bool *is_open = g_new0(bool, pool->n + 1);
    bool has_open = false;
    for (size_t r = 0; r < pool->n; r++) {
        is_open[r] = pool->basis[r] == RF_POOLED_NONE && pool->recordings[r].n > 0;
        has_open |= is_open[r];
    }
    if (has_open) read_first(pool, found, is_open);
    for (int pass = 0; pass < PASSES && has_open; pass++)
        if (!read_again(pool, found->unit_coulomb.value, is_open, error)) return false;
    return true;
}

/* ---- the answer ---- */

static void keep_part(RfPooledPart *part, const Pool *pool, size_t r, double nearby_coulomb,
                      const RfCommonMeanPart *from)
{
    const double unit_coulomb = nearby_coulomb * (1.0 + pool->x[r].value);
    const double own = pool->x[r].sigma, common = pool->common[r * pool->n + r];
    *part = (RfPooledPart){
        .basis = pool->basis[r],
        .unit_coulomb = {unit_coulomb, nearby_coulomb * sqrt(own * own + common)},
        .u_random_coulomb = nearby_coulomb * own,
        .weight = from->weight,
        .offset = from->offset,
        .deviate = from->deviate,
        .p = from->p,
    };
    if (from->without.sigma > 0.0)
        part->without_coulomb =
            (RfValue){nearby_coulomb * (1.0 + from->without.value), nearby_coulomb * from->without.sigma};
}

static bool conclude(const Pool *pool, RfPooledUnit *unit, GError **error)
{
    g_autofree size_t *rows = g_new(size_t, pool->n + 1);
    const double nearby_coulomb = unit->search->unit_coulomb.value;
    g_autoptr(RfCommonMean) mean = mean_of(pool, false, rows, error);
    if (mean == NULL) return false;
    unit->unit_coulomb =
        (RfValue){nearby_coulomb * (1.0 + mean->mean.value), nearby_coulomb * mean->mean.sigma};
    unit->u_random_coulomb = nearby_coulomb * mean->sigma_own;
    unit->used = (unsigned)mean->n;
    unit->chi_squared = mean->chi_squared;
    unit->p = mean->p;
    unit->most_off = rows[mean->most_off];
    unit->most_off_p = mean->most_off_p;
    for (size_t i = 0; i < mean->n; i++) {
        keep_part(&unit->parts[rows[i]], pool, rows[i], nearby_coulomb, &mean->parts[i]);
        for (size_t k = 0; k < pool->n_measurements; k++)
            unit->measurement_relative[k] +=
                mean->parts[i].weight * pool->influence[rows[i] * pool->n_measurements + k];
    }
    return true;
}

static bool settle(Pool *pool, RfPooledUnit *unit, GError **error)
{
    for (size_t r = 0; r < pool->n; r++)
        rf_charge_comb_prepare(pool->recordings[r].charges_coulomb, pool->recordings[r].n,
                               RF_CHARGE_UNIT_DEFAULTS.relative_floor, pool->charges[r]);
    fill_covariance(pool);
    read_alone(pool, unit->search->unit_coulomb.value);
    if (!read_open(pool, unit->search, error)) return false;
    unit->is_resolved = count_used(pool) > 0;
    return !unit->is_resolved || conclude(pool, unit, error);
}

static bool settle_in(RfPooledUnit *unit, const RfPooledRecording *recordings, GError **error)
{
    const size_t n = unit->n;
    Pool pool = {recordings,
                 n,
                 unit->n_measurements,
                 g_new(RfCombCharge *, n + 1),
                 g_new0(double, n * unit->n_measurements + 1),
                 g_new0(double, n *n + 1),
                 g_new0(RfValue, n + 1),
                 g_new0(RfPooledBasis, n + 1)};
    for (size_t r = 0; r < n; r++) pool.charges[r] = g_new(RfCombCharge, recordings[r].n + 1);
    const bool is_well = settle(&pool, unit, error);
    for (size_t r = 0; r < n; r++) g_free(pool.charges[r]);
    g_free(pool.charges);
    g_free(pool.influence);
    g_free(pool.common);
    g_free(pool.x);
    g_free(pool.basis);
    return is_well;
}

RfPooledUnit *rf_pooled_unit_new(const RfPooledRecording *recordings, size_t n, size_t n_measurements,
                                 unsigned trials, GError **error)
{
    g_autoptr(RfPooledUnit) unit = g_new0(RfPooledUnit, 1);
    unit->search = search(recordings, n, n_measurements, trials);
    unit->n = n;
    unit->n_measurements = n_measurements;
    unit->p = unit->most_off_p = 1.0;
    unit->parts = g_new0(RfPooledPart, n + 1);
    for (size_t r = 0; r < n; r++) unit->parts[r].p = 1.0;
    unit->measurement_relative = g_new0(double, n_measurements + 1);
    if (unit->search->is_resolved && !settle_in(unit, recordings, error)) return NULL;
    return g_steal_pointer(&unit);
}

void rf_pooled_unit_free(RfPooledUnit *unit)
{
    if (unit == NULL) return;
    rf_charge_unit_free(unit->search);
    g_free(unit->parts);
    g_free(unit->measurement_relative);
    g_free(unit);
}
