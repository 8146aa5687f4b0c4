#include "physics/two_radii.h"

#include <gsl/gsl_cdf.h>
#include <math.h>

#include "physics/constants.h"
#include "physics/evaporation.h"

/* Evidence this unlikely by chance is held to speak for a cause. */
static const double PLAIN_P = 0.01;

const char *rf_cause_to_string(RfCause cause)
{
    static const char *const names[RF_CAUSES] = {[RF_CAUSE_COMMON_MOTION] = "convection or camera motion",
                                                 [RF_CAUSE_EVAPORATION] = "evaporation",
                                                 [RF_CAUSE_DUST] = "dust",
                                                 [RF_CAUSE_TRACKING] = "tracking errors"};
    return names[cause];
}

static bool sees_twice(const RfDropletFit *fit)
{
    return fit->state == RF_FIT_DONE && fit->radius_fall_m.sigma > 0 && fit->radius_spread_m.sigma > 0;
}

static double fall_less_spread_m(const RfDropletFit *fit)
{
    return fit->radius_fall_m.value - fit->radius_spread_m.value;
}

/* Others that disagree at 5 % and in the same direction: chance makes it one in forty. */
static RfCauseEvidence examine_common(const RfDropletSet *set, size_t droplet)
{
    const RfDropletFit *own = &set->droplets[droplet].fit;
    unsigned others = 0, alike = 0;
    for (size_t i = 0; i < set->n; i++) {
        const RfDropletFit *fit = &set->droplets[i].fit;
        if (i == droplet || !sees_twice(fit)) continue;
        others++;
        alike += fit->radius_agreement_p < 0.05 && fall_less_spread_m(fit) * fall_less_spread_m(own) > 0;
    }
    bool is_many = others > 0 && gsl_cdf_binomial_Q(alike > 0 ? alike - 1 : 0, 0.025, others) < PLAIN_P;
    bool is_supported = (alike > 0 && is_many) || set->drift->fall_p < PLAIN_P;
    return (RfCauseEvidence){
        is_supported, g_strdup_printf("%u of %u others disagree the same way, common drift along gravity "
                                      "has p = %.2g",
                                      alike, others, set->drift->fall_p)};
}

static RfCauseEvidence examine_trend(const RfTrail *trails, const RfDropletSet *set, const RfMedium *medium,
                                     size_t droplet)
{
    RfValue k_m2_s;
    const RfDropletModel model = {
        .medium = medium, .timeline = set->timeline, .fall_memory = set->fall_memory};
    if (!rf_evaporation_of(&trails[droplet], &model, &set->droplets[droplet].fit, &k_m2_s))
        return (RfCauseEvidence){false, g_strdup("its speed can't be looked at for a trend")};
    if (rf_evaporation_is_plain(&set->evaporation)) k_m2_s.value -= set->evaporation.k_m2_s.value;
    double p = 2 * gsl_cdf_ugaussian_Q(fabs(k_m2_s.value) / k_m2_s.sigma);
    return (RfCauseEvidence){p < PLAIN_P && k_m2_s.value > 0,
                             g_strdup_printf("trend of its speed as if radius squared fell by %.2g um^2/s "
                                             "(u = %.2g um^2/s)",
                                             k_m2_s.value * 1e12, k_m2_s.sigma * 1e12)};
}

static RfCauseEvidence examine_charge(const RfDropletFit *fit)
{
    bool is_charged = false, has_charge = false;
    double largest = 0;
    for (size_t k = 0; k < fit->spells; k++) {
        const RfValue *charge = &fit->spell[k].charge_coulomb;
        if (!fit->spell[k].has_charge) continue;
        has_charge = true;
        is_charged |= fabs(charge->value) > 4 * charge->sigma;
        largest = fmax(largest, fabs(charge->value));
    }
    if (!has_charge) return (RfCauseEvidence){false, g_strdup("never seen under a field")};
    return (RfCauseEvidence){!is_charged, g_strdup_printf(is_charged ? "it carries a charge, about %.1f e"
                                                                     : "it carries no charge, %.1f e at most",
                                                          largest / RF_ELEMENTARY_CHARGE_COULOMB)};
}

static RfCauseEvidence examine_spread(const RfDropletFit *fit)
{
    bool is_restless = fall_less_spread_m(fit) > 0;
    return (RfCauseEvidence){
        is_restless, g_strdup(is_restless ? "it spreads more than its fall allows"
                                          : "it spreads less than its fall asks, which errors don't do")};
}

void rf_two_radii_examine(const RfTrail *trails, const RfDropletSet *set, const RfMedium *medium,
                          size_t droplet, RfCauseEvidence found[RF_CAUSES])
{
    const RfDropletFit *fit = &set->droplets[droplet].fit;
    found[RF_CAUSE_COMMON_MOTION] = examine_common(set, droplet);
    found[RF_CAUSE_EVAPORATION] = examine_trend(trails, set, medium, droplet);
    found[RF_CAUSE_DUST] = examine_charge(fit);
    found[RF_CAUSE_TRACKING] = examine_spread(fit);
}
