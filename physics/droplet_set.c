#include "physics/droplet_set.h"

#include <math.h>

#include "physics/noise_memory.h"

typedef struct {
    const RfTrail *trails;
    const RfDropletSetSettings *settings;
    RfDropletSet *set;
} Work;

static size_t step_times(const GArray *steps, double *time_s)
{
    for (unsigned k = 0; k < steps->len; k++) time_s[k] = g_array_index(steps, RfChargeStep, k).time_s.value;
    return steps->len;
}

static RfDropletModel model_of(const Work *work)
{
    return (RfDropletModel){.medium = work->settings->medium,
                            .timeline = work->set->timeline,
                            .drift = work->set->drift,
                            .fall_memory = work->set->fall_memory,
                            .across_memory = work->set->across_memory};
}

/* Fit without steps, steps from it, fit with them. */
static void measure_one(void *context, size_t i)
{
    const Work *work = context;
    RfDropletResult *result = &work->set->droplets[i];
    const RfTrail *trail = &work->trails[i];
    RfDropletModel model = model_of(work);
    double time_s[RF_DROPLET_SPELLS_MAX];
    rf_droplet_fit(trail, &model, &result->fit);
    g_array_unref(result->steps);
    result->steps = rf_charge_step_find(trail, &model, &result->fit);
    model.step_s = time_s;
    model.steps = step_times(result->steps, time_s);
    if (model.steps > 0) rf_droplet_fit(trail, &model, &result->fit);
}

static void measure_all(Work *work)
{
    rf_for_each(&work->settings->side_by_side, work->set->n, measure_one, work);
}

/* Each step against another droplet from there on. */
static void look_for_swap(void *context, size_t i)
{
    const Work *work = context;
    RfDropletResult *result = &work->set->droplets[i];
    RfDropletModel model = model_of(work);
    double time_s[RF_DROPLET_SPELLS_MAX];
    model.step_s = time_s;
    model.steps = result->fit.state == RF_FIT_DONE ? step_times(result->steps, time_s) : 0;
    for (size_t k = 0; k < model.steps; k++) {
        const RfChargeStep *step = &g_array_index(result->steps, RfChargeStep, k);
        double half_s = step->across_off ? 0.5 * sqrt(12) * step->time_s.sigma : 0;
        RfDropletSwap swap;
        if (!rf_droplet_swap_weigh(&work->trails[i], &model, k, time_s[k] - half_s, time_s[k] + half_s,
                                   &swap))
            continue;
        if (!(swap.log_odds > 0) || (result->is_swapped && swap.log_odds < result->swap.log_odds)) continue;
        result->is_swapped = true;
        result->swap = swap;
    }
}

/* Room for what a witness borrows. */
typedef struct {
    double end_s[RF_DROPLET_SPELLS_MAX], per_volt[RF_DROPLET_SPELLS_MAX], u_per_volt[RF_DROPLET_SPELLS_MAX];
} WitnessSpells;

static RfSwitchWitness witness_of(const Work *work, size_t i, WitnessSpells *spells)
{
    const RfDropletResult *result = &work->set->droplets[i];
    const RfDropletFit *fit = &result->fit;
    bool is_done = fit->state == RF_FIT_DONE;
    for (size_t k = 0; is_done && k < fit->spells; k++) {
        spells->end_s[k] =
            k < result->steps->len ? g_array_index(result->steps, RfChargeStep, k).time_s.value : HUGE_VAL;
        spells->per_volt[k] = fit->spell[k].speed_per_volt_m_s_v.value;
        spells->u_per_volt[k] = fit->spell[k].speed_per_volt_m_s_v.sigma;
    }
    return (RfSwitchWitness){
        .trail = &work->trails[i],
        .usable = is_done,
        .noise = {fit->diffusion_m2_s.value, fit->fall_extra_variance_m2.value, work->set->fall_memory},
        .fall_m_s = fit->fall_m_s.value,
        .spells = is_done ? fit->spells : 0,
        .spell_end_s = spells->end_s,
        .speed_per_volt_m_s_v = spells->per_volt,
        .u_speed_per_volt_m_s_v = spells->u_per_volt};
}

static void refine_switches(const Work *work)
{
    size_t n = work->set->n;
    g_autofree RfSwitchWitness *witnesses = g_new(RfSwitchWitness, n);
    g_autofree WitnessSpells *spells = g_new0(WitnessSpells, n);
    for (size_t i = 0; i < n; i++) witnesses[i] = witness_of(work, i, &spells[i]);
    rf_field_timeline_refine(work->set->timeline, witnesses, n);
}

/* What the fits leave of each path on one axis: what a common drift may explain. */
static double *residue(const Work *work, size_t i, bool is_fall, double *time_s)
{
    const RfTrail *trail = &work->trails[i];
    WitnessSpells spells;
    RfSwitchWitness w = witness_of(work, i, &spells);
    double *place_m = g_new(double, trail->n), moved_m = 0;
    size_t k = 0;
    for (size_t s = 0; s < trail->n; s++) {
        const RfSample *sample = &trail->samples[s];
        time_s[s] = sample->time_s;
        while (k + 1 < w.spells && sample->time_s >= w.spell_end_s[k]) k++;
        if (is_fall && s > 0)
            moved_m += w.speed_per_volt_m_s_v[k] *
                       (rf_field_timeline_impulse_v_s(work->set->timeline, sample->time_s) -
                        rf_field_timeline_impulse_v_s(work->set->timeline, time_s[s - 1]));
        place_m[s] = is_fall ? sample->fall_m - moved_m : sample->drift_m;
    }
    return place_m;
}

static double fit_drift_axis(const Work *work, bool is_fall, GArray *knots_s, GArray *speeds, double *p)
{
    size_t n = work->set->n, used = 0;
    g_autofree RfDriftPath *paths = g_new0(RfDriftPath, n);
    for (size_t i = 0; i < n; i++) {
        const RfDropletFit *fit = &work->set->droplets[i].fit;
        if (fit->state != RF_FIT_DONE) continue;
        const RfSample *s = work->trails[i].samples;
        double *time_s = g_new(double, work->trails[i].n), u = is_fall ? s->u_fall_m : s->u_drift_m;
        paths[used++] = (RfDriftPath){.n = work->trails[i].n,
                                      .time_s = time_s,
                                      .place_m = residue(work, i, is_fall, time_s),
                                      .diffusion_m2_s = fit->diffusion_m2_s.value,
                                      .noise_m2 = u * u};
    }
    double rms = rf_common_drift_fit(paths, used, knots_s, speeds, p);
    for (size_t i = 0; i < used; i++) {
        g_free((void *)paths[i].time_s);
        g_free((void *)paths[i].place_m);
    }
    return rms;
}

static void fit_common_drift(const Work *work)
{
    RfCommonDrift *drift = work->set->drift;
    drift->across_rms_m_s =
        fit_drift_axis(work, false, drift->across_time_s, drift->across_m_s, &drift->across_p);
    drift->fall_rms_m_s = fit_drift_axis(work, true, drift->fall_time_s, drift->fall_m_s, &drift->fall_p);
}

static void estimate_memory(const Work *work)
{
    size_t n = work->set->n;
    RfDropletModel model = model_of(work);
    g_autofree RfDropletFit *fits = g_new(RfDropletFit, n);
    for (size_t i = 0; i < n; i++) fits[i] = work->set->droplets[i].fit;
    rf_noise_memory_estimate(work->trails, fits, n, &model, &work->settings->side_by_side,
                             &work->set->fall_memory, &work->set->across_memory);
}

/* ---- evaporation ---- */

static RfEvaporation pool_evaporation(const Work *work)
{
    size_t n = work->set->n;
    RfDropletModel model = model_of(work);
    g_autofree const RfDropletFit **fits = g_new(const RfDropletFit *, n);
    for (size_t i = 0; i < n; i++) fits[i] = &work->set->droplets[i].fit;
    return rf_evaporation_pool(work->trails, fits, n, &model);
}

/* From paths from which shrinking by k is taken off. Without a drift: what was found so far held part of the shrinkage. */
static void measure_undone(Work *work, const RfTrail *as_seen, RfTrail *undone, double k_m2_s)
{
    RfDropletModel model = model_of(work);
    for (size_t i = 0; i < work->set->n; i++) {
        RfSample *samples = rf_evaporation_undo(&as_seen[i], &model, &work->set->droplets[i].fit, k_m2_s);
        g_free((void *)undone[i].samples);
        undone[i] = (RfTrail){as_seen[i].droplet, as_seen[i].n, samples};
    }
    work->trails = undone;
    rf_common_drift_free(work->set->drift);
    work->set->drift = rf_common_drift_new();
    measure_all(work);
}

/* One sigma more of shrinkage, and the same fit again. */
static void measure_effect(void *context, size_t i)
{
    const Work *work = context;
    RfDropletResult *result = &work->set->droplets[i];
    RfDropletFit *fit = &result->fit, more;
    RfDropletModel model = model_of(work);
    double time_s[RF_DROPLET_SPELLS_MAX];
    model.step_s = time_s;
    model.steps = fit->state == RF_FIT_DONE ? step_times(result->steps, time_s) : 0;
    g_autofree RfSample *samples =
        rf_evaporation_undo(&work->trails[i], &model, fit, work->set->evaporation.k_m2_s.sigma);
    const RfTrail trail = {work->trails[i].droplet, work->trails[i].n, samples};
    rf_droplet_fit(&trail, &model, &more);
    if (fit->state != RF_FIT_DONE || more.state != RF_FIT_DONE) return;
    fit->evaporation_radius_m = more.radius_m.value - fit->radius_m.value;
    for (size_t k = 0; k < MIN(fit->spells, more.spells); k++)
        fit->spell[k].evaporation_coulomb =
            more.spell[k].charge_coulomb.value - fit->spell[k].charge_coulomb.value;
}

/* Shrinking taken off until none is left: what is found is of first order, and steps and drift may have passed for part
 * of it at first. */
static void take_off_evaporation(Work *work, RfTrail *undone)
{
    enum { ROUNDS = 4 };
    static const double settled = 0.1; /* of its sigma */
    const RfTrail *as_seen = work->trails;
    RfEvaporation *found = &work->set->evaporation;
    measure_undone(work, as_seen, undone, found->k_m2_s.value);
    for (int round = 0; round < ROUNDS; round++) {
        RfEvaporation rest = pool_evaporation(work);
        if (rest.droplets == 0) break;
        found->droplets = rest.droplets;
        found->k_m2_s = (RfValue){found->k_m2_s.value + rest.k_m2_s.value, rest.k_m2_s.sigma};
        measure_undone(work, as_seen, undone, found->k_m2_s.value);
        if (fabs(rest.k_m2_s.value) < settled * rest.k_m2_s.sigma) break;
    }
    fit_common_drift(work);
    if (work->set->drift->fall_rms_m_s > 0 || work->set->drift->across_rms_m_s > 0) measure_all(work);
    refine_switches(work);
    rf_for_each(&work->settings->side_by_side, work->set->n, measure_effect, work);
}

RfDropletSet *rf_droplet_set_measure(const RfTrail *trails, size_t n, const RfDropletSetSettings *settings,
                                     GError **error)
{
    g_autoptr(RfDropletSet) set = g_new0(RfDropletSet, 1);
    set->n = n;
    set->droplets = g_new0(RfDropletResult, n);
    for (size_t i = 0; i < n; i++) set->droplets[i].steps = g_array_new(FALSE, TRUE, sizeof(RfChargeStep));
    RfFieldSheet sheet = *settings->sheet;
    if (!sheet.medium) sheet.medium = settings->medium;
    set->timeline = rf_field_timeline_find(trails, n, &sheet, error);
    if (!set->timeline) return NULL;
    set->drift = rf_common_drift_new();
    Work work = {trails, settings, set};
    measure_all(&work);
    refine_switches(&work);
    fit_common_drift(&work);
    estimate_memory(&work);
    measure_all(&work);
    refine_switches(&work);
    set->evaporation = pool_evaporation(&work);
    g_autofree RfTrail *undone = g_new0(RfTrail, n);
    if (rf_evaporation_is_plain(&set->evaporation)) take_off_evaporation(&work, undone);
    rf_for_each(&settings->side_by_side, n, look_for_swap, &work);
    for (size_t i = 0; i < n; i++) g_free((void *)undone[i].samples);
    return g_steal_pointer(&set);
}

void rf_droplet_set_free(RfDropletSet *set)
{
    if (!set) return;
    rf_field_timeline_free(set->timeline);
    rf_common_drift_free(set->drift);
    for (size_t i = 0; i < set->n; i++) g_array_unref(set->droplets[i].steps);
    g_free(set->droplets);
    g_free(set);
}
