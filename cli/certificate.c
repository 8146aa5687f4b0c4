#include "cli/certificate.h"

#include "physics/agreement.h"

#include <math.h>
#include <stddef.h>

static void add(RfResults *results, RfCertificateRow row)
{
    row.en_number = rf_agreement_en_number(row.found, row.certified);
    g_array_append_val(results->certificate, row);
}

/* Weighted mean over droplets, each once; sigma its random part, no smaller than their scatter allows. */
static RfValue mean_radius_um(const GArray *droplets, size_t member, unsigned *n)
{
    double weight = 0, sum = 0, squares = 0;
    *n = 0;
    for (guint i = 0; i < droplets->len; i++) {
        const RfDropletRow *row = &g_array_index(droplets, RfDropletRow, i);
        const RfValue *radius_um = (const RfValue *)(const void *)((const char *)row + member);
        if (row->spell != 1 || !(radius_um->sigma > 0))
            continue;
        double w = 1 / (radius_um->sigma * radius_um->sigma);
        weight += w;
        sum += w * radius_um->value;
        squares += w * radius_um->value * radius_um->value;
        ++*n;
    }
    if (*n == 0)
        return (RfValue){0};
    double mean = sum / weight, scatter = *n > 1 ? (squares - weight * mean * mean) / (*n - 1) : 1;
    return (RfValue){mean, sqrt(fmax(scatter, 1) / weight)};
}

/* What scale, air and the rest, common to all, can have done to a radius seen one way. */
static bool add_radius(RfResults *results, const RfSettings *settings, const RfChargeInputs *inputs, size_t member,
                       bool is_spread, GError **error)
{
    const RfBudgetOptions first_order = {.coverage = 0.95};
    unsigned n;
    RfValue found_um = mean_radius_um(results->droplets, member, &n);
    if (n == 0)
        return true;
    const RfChargeEstimate estimate = {
        .radius_m = {found_um.value * 1e-6, found_um.sigma * 1e-6}, .spread_share = is_spread ? 1 : 0};
    g_autoptr(RfBudget) budget = rf_charge_budget_radius_new(inputs, &estimate, &first_order, NULL, error);
    if (!budget)
        return false;
    const RfValue certified_m = settings->certified_radius_m.v;
    add(results, (RfCertificateRow){.quantity = is_spread ? "radius from the spread" : "radius from the fall",
                                    .unit = "um",
                                    .certified = {certified_m.value * 1e6, certified_m.sigma * 1e6},
                                    .found = {found_um.value, budget->sigma * 1e6},
                                    .droplets = n});
    return true;
}

bool rf_certificate_check(RfResults *results, const RfSettings *settings, const RfChargeInputs *inputs,
                          GError **error)
{
    if (settings->certified_density_kg_m3.is_set)
        add(results, (RfCertificateRow){.quantity = "density in the sheet",
                                        .unit = "kg/m^3",
                                        .certified = settings->certified_density_kg_m3.v,
                                        .found = rf_oil_density_kg_m3(&inputs->oil, inputs->temperature_kelvin)});
    if (!settings->certified_radius_m.is_set)
        return true;
    return add_radius(results, settings, inputs, offsetof(RfDropletRow, radius_fall_um), false, error) &&
           add_radius(results, settings, inputs, offsetof(RfDropletRow, radius_spread_um), true, error);
}
