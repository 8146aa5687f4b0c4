#include "physics/charge_unit.h"

#include <gsl/gsl_math.h>
#include <gsl/gsl_randist.h>
#include <gsl/gsl_rng.h>
#include <gsl/gsl_sf_gamma.h>
#include <math.h>

#include "physics/charge_comb.h"

const RfChargeUnitOptions RF_CHARGE_UNIT_DEFAULTS = {
    .low_coulomb = 2e-20,
    .high_coulomb = 0.0,
    .relative_floor = 0.002,
    .relative_common = 0.0,
    .trials = 199,
    .seed = 1909, /* any would do; the year of the first oil drops */
    .wants_curve = false,
};

enum {
    MIN_CHARGED = 5,
    MIN_LEVELS = 3,
    MAX_DIVISOR = 12,
    WINDOW_POINTS = 161, /* of the fine look at the best unit: +/- 8 sigma */
    ENOUGH_AS_GOOD =
        20, /* null sets as good that settle the test early (Besag and Clifford, Biometrika 78 (1991) 301) */
    CURVE_POINTS = 1000,
};

static const double MIN_BAYES_FACTOR = 100.0;
static const double MAX_CHANCE = 0.01, MAX_OTHER_UNITS = 0.01, MAX_DIVISOR_CHANCE = 0.05;

/* Trial units, evenly spaced in ln e, and the likelihood at each. */
typedef struct {
    size_t n;
    double low, step; /* of ln e */
    double *log_likelihood;
} Grid;

static double grid_unit(const Grid *grid, size_t i)
{
    return exp(grid->low + grid->step * (double)i);
}

/* Step: a share of the relative sigma of the best-known charge; a quarter resolves every peak. */
static Grid grid_new(const RfCombCharge *charges, size_t n, double low_coulomb, double high_coulomb,
                     double share)
{
    double finest = 0.1;
    for (size_t i = 0; i < n; i++) {
        if (charges[i].neutral_probability < 0.5)
            finest = fmin(finest, charges[i].sigma_coulomb / fabs(charges[i].coulomb));
    }
    const double step = fmax(share * finest, 1e-4);
    const double low = log(low_coulomb), high = log(high_coulomb);
    const size_t points = (size_t)ceil((high - low) / step) + 1;
    return (Grid){points, low, step, g_new(double, points)};
}

static size_t grid_fill(Grid *grid, const RfCombCharge *charges, size_t n)
{
    size_t best = 0;
    for (size_t i = 0; i < grid->n; i++) {
        grid->log_likelihood[i] = rf_charge_comb_log_likelihood(charges, n, grid_unit(grid, i));
        if (grid->log_likelihood[i] > grid->log_likelihood[best]) best = i;
    }
    return best;
}

/* Standard deviation that the charges would give a unit if their multiples were known. */
static double sigma_at_known_multiples(const RfCombCharge *charges, size_t n, double unit_coulomb)
{
    double information = 0.0;
    for (size_t i = 0; i < n; i++) {
        const double multiple = nearbyint(charges[i].coulomb / unit_coulomb) / charges[i].sigma_coulomb;
        information += multiple * multiple;
    }
    return information > 0.0 ? 1.0 / sqrt(information) : unit_coulomb;
}

/* Mean and standard deviation of the posterior within 8 sigma of a unit. */
static RfValue posterior_near(const RfCombCharge *charges, size_t n, double unit_coulomb)
{
    const double reach = 8.0 * sigma_at_known_multiples(charges, n, unit_coulomb);
    double unit[WINDOW_POINTS], value[WINDOW_POINTS], highest = -G_MAXDOUBLE;
    for (int i = 0; i < WINDOW_POINTS; i++) {
        unit[i] = unit_coulomb + reach * (2.0 * i / (WINDOW_POINTS - 1.0) - 1.0);
        value[i] = unit[i] > 0.0 ? rf_charge_comb_log_likelihood(charges, n, unit[i]) : -G_MAXDOUBLE;
        highest = fmax(highest, value[i]);
    }
    double mass = 0.0, mean = 0.0, square = 0.0;
    for (int i = 0; i < WINDOW_POINTS; i++) {
        const double weight = exp(value[i] - highest), off = (unit[i] - unit_coulomb) / reach;
        mass += weight;
        mean += weight * off;
        square += weight * off * off;
    }
    mean /= mass;
    return (RfValue){unit_coulomb + reach * mean, reach * sqrt(fmax(square / mass - mean * mean, 1e-6))};
}

/* Posterior (even in ln e) outside 8 sigma of the best unit, and the Bayes factor over the whole range. */
static void weigh_units(const Grid *grid, size_t best, RfChargeUnit *unit)
{
    const double highest = grid->log_likelihood[best];
    const double ln_best = log(unit->unit_coulomb.value);
    const double reach = fmax(8.0 * unit->u_random_coulomb / unit->unit_coulomb.value, 1.5 * grid->step);
    double all = 0.0, other = 0.0;
    for (size_t i = 0; i < grid->n; i++) {
        const double mass = exp(grid->log_likelihood[i] - highest);
        all += mass;
        if (fabs(grid->low + grid->step * (double)i - ln_best) > reach) other += mass;
    }
    unit->other_units_probability = other / all;
    unit->log_bayes_factor = highest + log(all / (double)grid->n);
}

/* Chance that the true multiples, m times those seen, all share the divisor m though their neighbours were as open to
 * them: a Dirichlet prior, one count for each possible multiple, on m times as many of them. Occupied ones reinforce
 * themselves, so a hundred equal charges count for little. */
static double log_shared_divisor(unsigned possible, unsigned charged, int m)
{
    const double few = possible, many = (double)m * possible, n = charged;
    return gsl_sf_lngamma(many) - gsl_sf_lngamma(many + n) - gsl_sf_lngamma(few) + gsl_sf_lngamma(few + n);
}

/* If they do, the charges are the same and so is the fit: only that chance counts. A unit e/m whose multiples don't all
 * share m is another unit with another fit, and weigh_units has it. */
static double divisor_chance(unsigned possible, unsigned charged)
{
    double odds = 0.0;
    for (int m = 2; m <= MAX_DIVISOR; m++) odds += exp(log_shared_divisor(possible, charged, m));
    return odds / (1.0 + odds);
}

/* Counts charged droplets, outliers and different multiples; returns how many multiples were open to them. */
static unsigned count_levels(const RfCombCharge *charges, size_t n, RfChargeUnit *unit)
{
    g_autoptr(GHashTable) levels = g_hash_table_new(g_direct_hash, g_direct_equal);
    int largest = 1;
    bool has_positive = false, has_negative = false;
    for (size_t i = 0; i < n; i++) {
        if (charges[i].neutral_probability >= 0.5) continue;
        unit->charged++;
        const double ratio = rf_charge_comb_ratio(&charges[i], unit->unit_coulomb.value);
        if (ratio < 2.0 * RF_CHARGE_COMB_OUTLIER_PROBABILITY) {
            unit->outliers++;
            continue;
        }
        const int multiple = (int)nearbyint(charges[i].coulomb / unit->unit_coulomb.value);
        g_hash_table_add(levels, GINT_TO_POINTER(abs(multiple)));
        largest = MAX(largest, abs(multiple));
        if (multiple > 0) has_positive = true;
        if (multiple < 0) has_negative = true;
    }
    unit->levels = g_hash_table_size(levels);
    return (unsigned)largest * (has_positive && has_negative ? 2 : 1);
}

/* Charges blurred by more than half of the unit carry no comb of it; each keeps its sigma. */
static void draw_without_unit(const RfCombCharge *charges, size_t n, double blur_coulomb, gsl_rng *rng,
                              double relative_floor, RfValue *drawn)
{
    for (size_t i = 0; i < n; i++) {
        const RfCombCharge *source = &charges[gsl_rng_uniform_int(rng, n)];
        const double own = relative_floor * charges[i].coulomb;
        const double sigma = sqrt(fmax(charges[i].sigma_coulomb * charges[i].sigma_coulomb - own * own, 0.0));
        drawn[i] = (RfValue){source->coulomb + gsl_ran_gaussian(rng, blur_coulomb), sigma};
    }
}

/* On a coarser grid, for the observed charges and the drawn ones alike: only their comparison counts. */
static double chance_without_unit(const RfCombCharge *charges, size_t n, const RfChargeUnit *found,
                                  const RfChargeUnitOptions *options)
{
    Grid grid = grid_new(charges, n, found->low_coulomb, found->high_coulomb, 0.5);
    const double observed = grid.log_likelihood[grid_fill(&grid, charges, n)];
    g_autofree RfValue *drawn = g_new(RfValue, n);
    g_autofree RfCombCharge *prepared = g_new(RfCombCharge, n);
    gsl_rng *rng = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(rng, (unsigned long)options->seed);
    unsigned as_good = 0, trials = 0;
    while (trials < options->trials && as_good < ENOUGH_AS_GOOD) {
        draw_without_unit(charges, n, 0.6 * found->unit_coulomb.value, rng, options->relative_floor, drawn);
        rf_charge_comb_prepare(drawn, n, options->relative_floor, prepared);
        const size_t best = grid_fill(&grid, prepared, n);
        if (grid.log_likelihood[best] >= observed) as_good++;
        trials++;
    }
    gsl_rng_free(rng);
    g_free(grid.log_likelihood);
    return ((double)as_good + 1.0) / ((double)trials + 1.0);
}

static void keep_curve(const Grid *grid, size_t best, RfChargeUnit *unit)
{
    unit->curve_unit_coulomb = g_array_new(false, false, sizeof(double));
    unit->curve_log_likelihood = g_array_new(false, false, sizeof(double));
    const size_t stride = grid->n / CURVE_POINTS + 1;
    for (size_t i = 0; i < grid->n; i += stride) {
        size_t top = i; /* the highest of each stretch, so that no peak is lost */
        for (size_t j = i; j < MIN(i + stride, grid->n); j++)
            if (grid->log_likelihood[j] > grid->log_likelihood[top]) top = j;
        const double value = grid_unit(grid, top);
        const double relative = grid->log_likelihood[top] - grid->log_likelihood[best];
        g_array_append_val(unit->curve_unit_coulomb, value);
        g_array_append_val(unit->curve_log_likelihood, relative);
    }
}

static char *reason_against(const RfChargeUnit *unit, double typical_charge, double typical_sigma)
{
    if (unit->charged < MIN_CHARGED)
        return g_strdup_printf("too few: %u charged droplets, need at least %d", unit->charged, MIN_CHARGED);
    if (unit->log_bayes_factor < log(MIN_BAYES_FACTOR) || unit->chance > MAX_CHANCE)
        return g_strdup_printf(
            "too uncertain or too highly charged: charges near %.3g C with sigma near %.2g C show no "
            "common unit that charges without one wouldn't (Bayes factor %.3g, need %.0f; as good by "
            "chance %.3f, need %.2f)",
            typical_charge, typical_sigma, exp(fmin(unit->log_bayes_factor, 700.0)), MIN_BAYES_FACTOR,
            unit->chance, MAX_CHANCE);
    if (unit->other_units_probability > MAX_OTHER_UNITS)
        return g_strdup_printf(
            "ambiguous: units other than %.4g C explain these charges with probability %.3f, need "
            "%.2f",
            unit->unit_coulomb.value, unit->other_units_probability, MAX_OTHER_UNITS);
    if (unit->levels < MIN_LEVELS)
        return g_strdup_printf(
            "too much alike: the droplets show %u different multiple(s) of %.4g C, need at least %d",
            unit->levels, unit->unit_coulomb.value, MIN_LEVELS);
    if (unit->divisor_chance > MAX_DIVISOR_CHANCE)
        return g_strdup_printf(
            "too few to tell the unit from its parts: %.4g C divides all charges, but a half or a "
            "third of it may be the unit with probability %.3f, need %.2f",
            unit->unit_coulomb.value, unit->divisor_chance, MAX_DIVISOR_CHANCE);
    return NULL;
}

static char *reason_for(const RfChargeUnit *unit)
{
    return g_strdup_printf(
        "%u charged droplets on %u different multiples; Bayes factor %.2g against no common unit, as "
        "good by chance %.3f, other units %.2g, a shared divisor %.2g, %u outlier(s)",
        unit->charged, unit->levels, exp(fmin(unit->log_bayes_factor, 700.0)), unit->chance,
        unit->other_units_probability, unit->divisor_chance, unit->outliers);
}

typedef struct {
    double charge, sigma, smallest_sigma, largest_charge;
    unsigned charged;
} Typical;

static int compare_doubles(const void *a, const void *b)
{
    const double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

static Typical typical_of(const RfCombCharge *charges, size_t n)
{
    Typical typical = {.smallest_sigma = G_MAXDOUBLE};
    g_autofree double *sizes = g_new(double, 2 * n + 1);
    unsigned k = 0;
    for (size_t i = 0; i < n; i++) {
        if (charges[i].neutral_probability >= 0.5) continue;
        sizes[k] = fabs(charges[i].coulomb);
        sizes[n + k++] = charges[i].sigma_coulomb;
        typical.smallest_sigma = fmin(typical.smallest_sigma, charges[i].sigma_coulomb);
        typical.largest_charge =
            fmax(typical.largest_charge, fabs(charges[i].coulomb) + charges[i].sigma_coulomb);
    }
    typical.charged = k;
    if (k == 0) return typical;
    qsort(sizes, k, sizeof *sizes, compare_doubles);
    qsort(sizes + n, k, sizeof *sizes, compare_doubles);
    typical.charge = sizes[k / 2];
    typical.sigma = sizes[n + k / 2];
    return typical;
}

/* Fills unit with what the grid shows. */
static void search(const RfCombCharge *charges, size_t n, const RfChargeUnitOptions *options,
                   RfChargeUnit *unit)
{
    Grid grid = grid_new(charges, n, unit->low_coulomb, unit->high_coulomb, 0.25);
    const size_t best = grid_fill(&grid, charges, n);
    const RfValue rough = posterior_near(charges, n, grid_unit(&grid, best));
    const RfValue fine = posterior_near(charges, n, rough.value);
    unit->u_random_coulomb = fine.sigma;
    unit->unit_coulomb = (RfValue){fine.value, hypot(fine.sigma, options->relative_common * fine.value)};
    weigh_units(&grid, best, unit);
    unit->charged = 0;
    const unsigned possible = count_levels(charges, n, unit);
    unit->divisor_chance = divisor_chance(possible, unit->charged - unit->outliers);
    if (options->wants_curve) keep_curve(&grid, best, unit);
    unit->chance = options->trials > 0 ? chance_without_unit(charges, n, unit, options) : -1.0;
    g_free(grid.log_likelihood);
}

RfChargeUnit *rf_charge_unit_find(const RfValue *charges_coulomb, size_t n,
                                  const RfChargeUnitOptions *options)
{
    for (size_t i = 0; i < n; i++)
        g_assert(isfinite(charges_coulomb[i].value) && charges_coulomb[i].sigma > 0.0);
    RfChargeUnit *unit = g_new0(RfChargeUnit, 1);
    unit->chance = unit->other_units_probability = unit->divisor_chance = 1.0;
    g_autofree RfCombCharge *charges = g_new(RfCombCharge, n + 1);
    rf_charge_comb_prepare(charges_coulomb, n, options->relative_floor, charges);
    const Typical typical = typical_of(charges, n);
    unit->charged = typical.charged;

    /* Below two sigma of the best-known charge the comb's ripple is under 1.5 %. */
    unit->low_coulomb = fmax(options->low_coulomb, 2.0 * typical.smallest_sigma);
    unit->high_coulomb =
        options->high_coulomb > options->low_coulomb ? options->high_coulomb : typical.largest_charge;
    if (typical.charged >= MIN_CHARGED) {
        if (unit->low_coulomb < unit->high_coulomb) search(charges, n, options, unit);
    }
    unit->reason = reason_against(unit, typical.charge, typical.sigma);
    unit->is_resolved = unit->reason == NULL;
    if (unit->is_resolved) unit->reason = reason_for(unit);
    return unit;
}

void rf_charge_unit_free(RfChargeUnit *unit)
{
    if (unit == NULL) return;
    g_free(unit->reason);
    if (unit->curve_unit_coulomb != NULL) g_array_unref(unit->curve_unit_coulomb);
    if (unit->curve_log_likelihood != NULL) g_array_unref(unit->curve_log_likelihood);
    g_free(unit);
}
