#include "cli/effects.h"

#include "calib/quantity.h"
#include "physics/constants.h"
#include "physics/evaporation.h"
#include "physics/small_effects.h"

#include <math.h>
#include <stdlib.h>

/* Chance below which a trend is taken for evaporation. */
static const double evaporation_p = 1e-3;

static void add(RfResults *results, const char *effect, char *size, char *done)
{
    RfEffectRow row = {g_strdup(effect), size, done};
    g_array_append_val(results->effects, row);
}

/* A droplet that stands for the largest effects: the largest radius, speed and charge among those fitted. */
typedef struct {
    double radius_m, smallest_m, speed_m_s, charge_coulomb, longest_s;
} Extremes;

static Extremes extremes_of(const RfTrail *trails, const RfDropletSet *set)
{
    Extremes most = {.smallest_m = HUGE_VAL};
    for (size_t i = 0; i < set->n; i++) {
        const RfDropletFit *fit = &set->droplets[i].fit;
        if (fit->state != RF_FIT_DONE) continue;
        most.radius_m = fmax(most.radius_m, fit->radius_m.value);
        most.smallest_m = fmin(most.smallest_m, fit->radius_m.value);
        most.longest_s =
            fmax(most.longest_s, trails[i].samples[trails[i].n - 1].time_s - trails[i].samples[0].time_s);
        for (size_t k = 0; k < fit->spells; k++) {
            most.charge_coulomb = fmax(most.charge_coulomb, fabs(fit->spell[k].charge_coulomb.value));
            for (guint v = 0; v < set->timeline->intervals->len; v++) {
                double voltage_v = g_array_index(set->timeline->intervals, RfFieldInterval, v).voltage_v;
                most.speed_m_s =
                    fmax(most.speed_m_s,
                         fabs(fit->fall_m_s.value + fit->spell[k].speed_per_volt_m_s_v.value * voltage_v));
            }
        }
    }
    return most;
}

static char *what_evaporation_does(const RfEvaporation *found, const Extremes *most)
{
    if (rf_evaporation_is_plain(found))
        return g_strdup(
            "taken off the paths; radius stated for the middle of the time a droplet was watched");
    if (found->p < evaporation_p && found->k_m2_s.value > 0)
        return g_strdup(found->air_log_odds < 0
                            ? "not taken off: droplets differ in it by more than one evaporation allows"
                            : "not taken off: air that begins to rise explains it as well");
    double reach_m2_s = fabs(found->k_m2_s.value) + 2 * found->k_m2_s.sigma;
    double share = reach_m2_s * most->longest_s / (2 * most->smallest_m * most->smallest_m);
    return g_strdup_printf(
        "not beyond chance: taken as none; over %.0f s it could change the smallest radius by "
        "%.2g %% at most",
        most->longest_s, 100 * share);
}

static void state_evaporation(RfResults *results, const RfEvaporation *found, const Extremes *most)
{
    if (found->droplets == 0) {
        add(results, "evaporation", g_strdup("can't be told: no droplet kept its charge long enough"),
            g_strdup("none assumed"));
        return;
    }
    g_autofree char *k =
        rf_quantity_format((RfValue){found->k_m2_s.value * 1e12, found->k_m2_s.sigma * 1e12}, "um^2/s");
    add(results, "evaporation",
        g_strdup_printf("radius squared falls by %s (%u droplets, p = %.2g)", k, found->droplets, found->p),
        what_evaporation_does(found, most));
    if (rf_evaporation_is_plain(found))
        rf_results_warn(
            results,
            "droplets evaporate: radius squared falls by %s, p = %.1g; taken off their paths, and "
            "radii are those of the middle of their time",
            k, found->p);
    else if (found->p < evaporation_p && found->k_m2_s.value > 0)
        rf_results_warn(results,
                        "droplets slow down as if they evaporated or the air began to rise: radius squared "
                        "falls by %s, p = %.1g; not taken off, radii are those of the middle of their time",
                        k, found->p);
}

static void state_drift(RfResults *results, const RfCommonDrift *drift)
{
    bool falls = drift->fall_rms_m_s > 0, crosses = drift->across_rms_m_s > 0;
    add(results, "drift of the air along gravity",
        g_strdup_printf("changes by %.2g um/s rms (p = %.2g)", 1e6 * drift->fall_rms_m_s, drift->fall_p),
        g_strdup(falls
                     ? "its changes taken off; as much again carried as an unknown steady part, common to all"
                     : "none beyond chance: taken as zero; a steady one can't be told from the fall"));
    add(results, "drift of the air across gravity",
        g_strdup_printf("changes by %.2g um/s rms (p = %.2g)", 1e6 * drift->across_rms_m_s, drift->across_p),
        g_strdup(crosses ? "taken off, common to all"
                         : "none beyond chance; each droplet has a steady one of its own"));
}

static void state_small(RfResults *results, const RfMedium *medium, const Extremes *most)
{
    double middle_m = 0.5 * medium->plate_gap_m,
           plate = rf_small_effects_plate_drag(most->radius_m, middle_m);
    add(results, "closeness to a plate",
        g_strdup_printf("%.2g %% of the drag in mid-gap; 0.5 %% at %.2g mm from a plate", 200 * plate,
                        1e3 * 9.0 / 8.0 * most->radius_m / 0.005),
        g_strdup("left out: the picture doesn't show where the plates are"));
    add(results, "image charges in the plates",
        g_strdup_printf(
            "%.1g of the weight in mid-gap, for %.0f e",
            2 * rf_small_effects_image_charge(medium, most->smallest_m, most->charge_coulomb, middle_m),
            most->charge_coulomb / RF_ELEMENTARY_CHARGE_COULOMB),
        g_strdup("left out"));
    add(results, "inertia of the air",
        g_strdup_printf("%.1g of the drag at %.2g mm/s",
                        rf_small_effects_inertial_drag(medium, most->radius_m, most->speed_m_s),
                        1e3 * most->speed_m_s),
        g_strdup("left out"));
    double settling_s = rf_small_effects_settling_time_s(medium, most->radius_m);
    add(results, "time to reach a new speed",
        g_strdup_printf("%.2g us; a switch moves a droplet by %.1g nm", 1e6 * settling_s,
                        2e9 * settling_s * most->speed_m_s),
        g_strdup("left out"));
}

void rf_effects_state(RfResults *results, const RfTrail *trails, const RfDropletSet *set,
                      const RfChargeInputs *inputs)
{
    const RfMedium medium = rf_charge_budget_medium(inputs);
    const Extremes most = extremes_of(trails, set);
    if (!(most.radius_m > 0)) return;
    state_evaporation(results, &set->evaporation, &most);
    state_drift(results, set->drift);
    state_small(results, &medium, &most);
}
