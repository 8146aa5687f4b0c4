#include "cli/measure.h"

#include "calib/voltage_log.h"
#include "cli/assess.h"
#include "cli/common_inputs.h"
#include "cli/effects.h"
#include "cli/review_verdicts.h"
#include "cli/tally.h"
#include "cli/trails.h"

#include <math.h>

/* ---- the supply ---- */

static RfFieldState state_of_sign(int sign)
{
    return sign == 0 ? RF_FIELD_OFF : sign > 0 ? RF_FIELD_TOP_PLUS : RF_FIELD_TOP_MINUS;
}

static bool read_log(const char *path, RfSupply *supply, GError **error)
{
    g_autoptr(RfVoltageLog) log = rf_voltage_log_read(path, error);
    if (!log) return false;
    supply->log = g_array_new(FALSE, TRUE, sizeof(RfLogSpan));
    for (guint i = 0; i < log->spells->len; i++) {
        const RfLogSpell *spell = &g_array_index(log->spells, RfLogSpell, i);
        RfLogSpan span = {spell->start_s, spell->end_s, 0, state_of_sign(spell->sign),
                          spell->voltage_V.value};
        if (i > 0) {
            const RfLogSwitch *before = &g_array_index(log->switches, RfLogSwitch, i - 1);
            span.start_s = before->time_s.value;
            span.u_start_s = before->time_s.sigma;
            g_array_index(supply->log, RfLogSpan, i - 1).end_s = span.start_s;
        }
        g_array_append_val(supply->log, span);
    }
    supply->sheet.log = (const RfLogSpan *)(const void *)supply->log->data;
    supply->sheet.log_spans = supply->log->len;
    return true;
}

RfSupply *rf_measure_supply_new(const RfSettings *settings, GError **error)
{
    g_autoptr(RfSupply) supply = g_new0(RfSupply, 1);
    supply->sheet.states = settings->n_states;
    RfValue voltage = {0};
    for (unsigned i = 0; i < settings->n_states; i++) supply->sheet.state[i] = settings->states[i];
    if (rf_settings_voltage(settings, RF_FIELD_TOP_PLUS, &voltage)) supply->sheet.top_plus_v = voltage.value;
    if (rf_settings_voltage(settings, RF_FIELD_TOP_MINUS, &voltage))
        supply->sheet.top_minus_v = -voltage.value;
    if (settings->log && !read_log(settings->log, supply, error)) return NULL;
    return g_steal_pointer(&supply);
}

void rf_measure_supply_free(RfSupply *supply)
{
    if (!supply) return;
    if (supply->log) g_array_unref(supply->log);
    g_free(supply);
}

/* ---- droplets side by side ---- */

typedef struct {
    void (*work)(void *context, size_t i);
    void *context;
} Job;

static void do_job(void *item, void *user)
{
    const Job *job = user;
    job->work(job->context, GPOINTER_TO_SIZE(item) - 1);
}

static void for_each(void *user, size_t n, void (*work)(void *context, size_t i), void *context)
{
    int threads = *(const int *)user;
    Job job = {work, context};
    GThreadPool *pool = threads == 1 ? NULL : g_thread_pool_new(do_job, &job, threads, TRUE, NULL);
    for (size_t i = 0; i < n; i++)
        if (pool)
            g_thread_pool_push(pool, GSIZE_TO_POINTER(i + 1), NULL);
        else
            work(context, i);
    if (pool) g_thread_pool_free(pool, FALSE, TRUE);
}

/* ---- rows ---- */

static void add_switches(RfResults *results, const RfFieldTimeline *timeline)
{
    for (guint i = 0; i < timeline->switches->len; i++) {
        const RfFieldSwitch *one = &g_array_index(timeline->switches, RfFieldSwitch, i);
        RfSwitchRow row = {
            .number = i + 1,
            .time_s = one->time_s,
            .from = one->from,
            .to = one->to,
            .droplets = one->droplets,
            .log_time_s = one->log_time_s,
            .has_log_time = one->has_log_time,
        };
        g_array_append_val(results->switches, row);
    }
}

/* Mean velocity of samples [first, end) on one axis, by generalised least squares under the path's own noise. */
static RfValue velocity_mm_s(const RfTrail *trail, size_t first, size_t end, bool is_fall,
                             double diffusion_m2_s, double extra_variance_m2)
{
    size_t n = end - first;
    g_autofree double *times_s = g_new(double, n), *u_m = g_new(double, n), *columns = g_new(double, 2 * n);
    for (size_t i = 0; i < n; i++) {
        const RfSample *sample = &trail->samples[first + i];
        times_s[i] = sample->time_s;
        u_m[i] = is_fall ? sample->u_fall_m : sample->u_drift_m;
        columns[2 * i] = is_fall ? sample->fall_m : sample->drift_m;
        columns[2 * i + 1] = sample->time_s - trail->samples[first].time_s;
    }
    RfPathNoise noise = {.diffusion_m2_s = diffusion_m2_s, .extra_variance_m2 = extra_variance_m2};
    double log_det, log_det_information, rest, velocity_m_s, variance;
    if (!rf_path_likelihood_whiten(&noise, n, times_s, u_m, 2, columns, &log_det) ||
        !rf_path_likelihood_solve(n, 2, columns, &velocity_m_s, &variance, &rest, &log_det_information))
        return (RfValue){0};
    return (RfValue){velocity_m_s * 1e3, sqrt(variance) * 1e3};
}

enum { SEGMENT_SAMPLES_MIN = 3 };

static void add_segments_of(RfResults *results, const RfTrail *trail, const RfDropletFit *fit,
                            const RfFieldTimeline *timeline)
{
    size_t first = 0;
    unsigned number = 0;
    for (guint k = 0; k < timeline->intervals->len; k++) {
        const RfFieldInterval *interval = &g_array_index(timeline->intervals, RfFieldInterval, k);
        while (first < trail->n && trail->samples[first].time_s < interval->start_s) first++;
        size_t end = first;
        while (end < trail->n &&
               (trail->samples[end].time_s < interval->end_s || k + 1 == timeline->intervals->len))
            end++;
        if (end - first < SEGMENT_SAMPLES_MIN) continue;
        RfSegmentRow row = {
            .droplet = trail->droplet,
            .segment = ++number,
            .start_s = trail->samples[first].time_s,
            .end_s = trail->samples[end - 1].time_s,
            .field = interval->state,
            .voltage_V = interval->voltage_v,
            .fall_mm_s = velocity_mm_s(trail, first, end, true, fit->diffusion_m2_s.value,
                                       fit->fall_extra_variance_m2.value),
            .drift_mm_s = velocity_mm_s(trail, first, end, false, fit->diffusion_m2_s.value,
                                        fit->across_extra_variance_m2.value),
            .frames = (unsigned)(end - first),
        };
        g_array_append_val(results->segments, row);
    }
}

static void add_segments(RfResults *results, const RfTrailSet *trails, const RfDropletSet *set)
{
    for (size_t i = 0; i < trails->n; i++)
        if (set->droplets[i].fit.state == RF_FIT_DONE)
            add_segments_of(results, &trails->trails[i], &set->droplets[i].fit, set->timeline);
}

/* ---- what a reader should know ---- */

static void warn_of_log(RfResults *results, const RfLogFinding *finding)
{
    switch (finding->kind) {
    case RF_LOG_AGREES:
        break;
    case RF_LOG_MISSING:
        rf_results_warn(results, "the droplets show a switch at %.2f s that the voltage log doesn't have",
                        finding->time_s);
        break;
    case RF_LOG_EXTRA:
        rf_results_warn(results, "the voltage log has a switch at %.2f s that the droplets contradict",
                        finding->time_s);
        break;
    case RF_LOG_UNSEEN:
        rf_results_warn(results, "the voltage log's switch at %.2f s was seen by no charged droplet",
                        finding->time_s);
        break;
    case RF_LOG_UNTIED:
        rf_results_warn(results,
                        "no droplet moved with the field that the voltage log reports: they carry no charge, "
                        "or the log is another "
                        "recording's; its clock is taken to be %.1f s ahead of the recording's",
                        finding->difference.value);
        break;
    case RF_LOG_LATE:
        rf_results_warn(
            results, "the voltage log's switch at %.2f s is %.3f s off what the droplets show (u = %.3f s)",
            finding->time_s, finding->difference.value, finding->difference.sigma);
        break;
    case RF_LOG_VOLTAGE_MISFIT:
        rf_results_warn(
            results, "from %.2f s on the droplets move as under %.1f V more than the log says (u = %.1f V)",
            finding->time_s, finding->difference.value, finding->difference.sigma);
        break;
    }
}

/* A sheet whose first state isn't the one that the recording starts in. */
static void warn_of_order(RfResults *results, const RfFieldTimeline *timeline, const RfFieldSheet *sheet)
{
    RfFieldState first = g_array_index(timeline->intervals, RfFieldInterval, 0).state;
    if (timeline->has_log || first == sheet->state[0]) return;
    rf_results_warn(
        results,
        "the droplets contradict the sheet: by their fall and their wander the recording starts with "
        "the field at %s, not at %s as [supply] states has it first; taken as the droplets have it",
        rf_tally_field_to_string(first), rf_tally_field_to_string(sheet->state[0]));
}

static void warn_of_timeline(RfResults *results, const RfFieldTimeline *timeline, const RfFieldSheet *sheet)
{
    warn_of_order(results, timeline, sheet);
    double doubtful_s = 0;
    for (guint i = 0; i < timeline->doubts->len; i++) {
        const RfStateDoubt *doubt = &g_array_index(timeline->doubts, RfStateDoubt, i);
        doubtful_s += doubt->end_s - doubt->start_s;
    }
    if (doubtful_s > 0)
        rf_results_warn(
            results,
            "for %.1f s in all, motion can't settle which field state the recording is in; charges that hang "
            "on it are "
            "set aside. A voltage log would tell, or droplets that stay in view across the switches",
            doubtful_s);
    for (guint i = 0; i < timeline->findings->len; i++)
        warn_of_log(results, &g_array_index(timeline->findings, RfLogFinding, i));
}

/* ---- paths that passed from one droplet to another ---- */

static void note_cut(RfResults *results, const RfTrailSet *trails, size_t i, const RfDropletSwap *swap,
                     unsigned as)
{
    size_t partner = 0;
    bool is_merged = rf_droplet_swap_kind(trails->trails, trails->n, i, swap, &partner) == RF_SWAP_MERGED;
    g_autofree char *where = is_merged ? g_strdup_printf(", where droplet %u ends: they may have merged",
                                                         trails->trails[partner].droplet)
                                       : g_strdup("");
    char *cut = g_strdup_printf(
        "droplet %u is another one from %.2f s on%s: not only its charge but its radius changes there, by "
        "%.0f %% (u = %.0f %%); what follows is droplet %u",
        trails->trails[i].droplet, swap->time_s, where, 100 * expm1(swap->log_radius_change.value),
        100 * exp(swap->log_radius_change.value) * swap->log_radius_change.sigma, as);
    g_ptr_array_add(results->cuts, cut);
}

/* Cuts each such path in two. Returns false where there was none. */
static bool cut_swapped(RfResults *results, const RfTrailSet *trails, const RfDropletSet *set)
{
    unsigned last = trails->trails[trails->n - 1].droplet, as = last;
    for (size_t i = 0; i < set->n; i++) {
        const RfDropletResult *result = &set->droplets[i];
        if (!result->is_swapped) continue;
        note_cut(results, trails, i, &result->swap, ++as);
        rf_trails_cut(results->paths, trails->trails[i].droplet, result->swap.time_s, as);
    }
    return as > last;
}

/* Measured, and measured again while paths had to be cut: what all droplets share hangs on each of them. Paths that a
 * person has reviewed are final. */
static RfDropletSet *measure_whole_paths(RfResults *results, const RfDropletSetSettings *how,
                                         RfTrailSet **trails, GError **error)
{
    enum { ROUNDS = 4 };
    RfDropletSet *set = NULL;
    for (int round = 0; round < ROUNDS; round++) {
        *trails = rf_trails_new(results->paths);
        set = rf_droplet_set_measure((*trails)->trails, (*trails)->n, how, error);
        if (!set || round + 1 == ROUNDS || results->without || !cut_swapped(results, *trails, set)) break;
        rf_droplet_set_free(set);
        rf_trails_free(*trails);
    }
    return set;
}

static bool measure_droplets(RfResults *results, const RfChargeInputs *inputs, const RfSupply *supply,
                             int threads, GError **error)
{
    int workers = threads > 0 ? threads : (int)g_get_num_processors();
    const RfMedium medium = rf_charge_budget_medium(inputs);
    RfDropletSetSettings how = {
        .medium = &medium,
        .sheet = &supply->sheet,
        .side_by_side = {for_each, &workers},
    };
    g_autoptr(RfTrailSet) trails = NULL;
    g_autoptr(RfDropletSet) set = measure_whole_paths(results, &how, &trails, error);
    if (!set) return false;
    for (guint i = 0; i < results->cuts->len; i++)
        rf_results_warn(results, "%s", (char *)results->cuts->pdata[i]);
    add_switches(results, set->timeline);
    results->has_log_clock = set->timeline->has_log && set->timeline->log_offset_s.sigma > 0;
    results->log_offset_s = set->timeline->log_offset_s;
    results->log_drift = set->timeline->log_drift;
    add_segments(results, trails, set);
    /* Vertical drift of the air can't be told from falling; as much of it as shows by changing is carried. */
    RfChargeInputs shared = *inputs;
    shared.air_drift_u_m_s = set->drift->fall_rms_m_s;
    if (rf_evaporation_is_plain(&set->evaporation)) {
        shared.evaporation_m2_s = set->evaporation.k_m2_s;
        rf_common_inputs_add_evaporation(results, shared.evaporation_m2_s);
    }
    if (!rf_assess_droplets(results, trails->trails, set, &shared, error)) return false;
    rf_review_verdicts_apply(results);
    if (!rf_assess_budget(results, trails->trails, set, &shared, error)) return false;
    warn_of_timeline(results, set->timeline, &supply->sheet);
    rf_effects_state(results, trails->trails, set, &shared);
    return true;
}

bool rf_measure_paths(RfResults *results, const RfChargeInputs *inputs, const RfSupply *supply, int threads,
                      GError **error)
{
    if (results->paths->len > 0 && !measure_droplets(results, inputs, supply, threads, error)) return false;
    rf_assess_unit(results);
    rf_assess_run(results);
    return true;
}
