#include "physics/field_timeline.h"

#include <math.h>

#include "physics/end_switch.h"
#include "physics/field_log.h"
#include "physics/field_runs.h"
#include "physics/field_states.h"
#include "physics/switch_instant.h"
#include "physics/trail_join.h"

/* Another state this likely is reason enough not to trust a charge. */
static const double DOUBT_MIN = 1e-3;

RfFieldTimeline *rf_field_timeline_new(void)
{
    RfFieldTimeline *timeline = g_new0(RfFieldTimeline, 1);
    timeline->intervals = g_array_new(FALSE, TRUE, sizeof(RfFieldInterval));
    timeline->switches = g_array_new(FALSE, TRUE, sizeof(RfFieldSwitch));
    timeline->findings = g_array_new(FALSE, TRUE, sizeof(RfLogFinding));
    timeline->doubts = g_array_new(FALSE, TRUE, sizeof(RfStateDoubt));
    return timeline;
}

void rf_field_timeline_free(RfFieldTimeline *timeline)
{
    if (!timeline) return;
    g_array_unref(timeline->intervals);
    g_array_unref(timeline->switches);
    g_array_unref(timeline->findings);
    g_array_unref(timeline->doubts);
    g_free(timeline);
}

const RfFieldInterval *rf_field_timeline_at(const RfFieldTimeline *timeline, double time_s)
{
    unsigned last = timeline->intervals->len - 1;
    const RfFieldInterval *interval = (const RfFieldInterval *)(const void *)timeline->intervals->data;
    for (unsigned k = 0; k < last; k++, interval++)
        if (time_s < interval->end_s) break;
    return interval;
}

double rf_field_timeline_impulse_v_s(const RfFieldTimeline *timeline, double time_s)
{
    const RfFieldInterval *interval = (const RfFieldInterval *)(const void *)timeline->intervals->data;
    unsigned n = timeline->intervals->len;
    double sum = 0;
    for (unsigned k = 0; k < n; k++, interval++) {
        if (k + 1 == n || time_s < interval->end_s)
            return sum + interval->voltage_v * (time_s - interval->start_s);
        sum += interval->voltage_v * (interval->end_s - interval->start_s);
    }
    return sum;
}

static double sheet_voltage(const RfFieldSheet *sheet, RfFieldState state)
{
    if (state == RF_FIELD_OFF) return 0;
    return state == RF_FIELD_TOP_PLUS ? sheet->top_plus_v : sheet->top_minus_v;
}

/* One level per state, as the sheet has it. */
static size_t sheet_levels(const RfFieldSheet *sheet, RfFieldLevel *levels)
{
    for (unsigned s = 0; s < sheet->states; s++)
        levels[s] = (RfFieldLevel){sheet->state[s], s, sheet_voltage(sheet, sheet->state[s])};
    return sheet->states;
}

/* Runs of one label become one interval. */
static void collect_intervals(RfFieldTimeline *timeline, const RfFieldRuns *runs, const unsigned *label,
                              const RfFieldLevel *levels)
{
    for (size_t r = 0; r < runs->runs; r++) {
        if (r > 0 && label[r] == label[r - 1]) {
            g_array_index(timeline->intervals, RfFieldInterval, timeline->intervals->len - 1).end_s =
                runs->edge_s[r + 1];
            continue;
        }
        const RfFieldLevel *level = &levels[label[r]];
        RfFieldInterval interval = {runs->edge_s[r], runs->edge_s[r + 1], level->state, level->voltage_v};
        g_array_append_val(timeline->intervals, interval);
        if (r == 0) continue;
        RfFieldSwitch s = {.time_s = {runs->edge_s[r], 0.1},
                           .from = levels[label[r - 1]].state,
                           .to = level->state,
                           .change_v = level->voltage_v - levels[label[r - 1]].voltage_v};
        g_array_append_val(timeline->switches, s);
    }
}

static void collect_doubts(RfFieldTimeline *timeline, const RfFieldRuns *runs, const double *doubt)
{
    for (size_t r = 0; r < runs->runs; r++) {
        RfStateDoubt one = {runs->edge_s[r], runs->edge_s[r + 1], doubt[r]};
        if (doubt[r] > DOUBT_MIN) g_array_append_val(timeline->doubts, one);
    }
}

bool rf_field_timeline_is_doubtful(const RfFieldTimeline *timeline, double start_s, double end_s)
{
    static const double brief_s = 0.15; /* edges are that rough; nothing hangs on so little */
    for (unsigned i = 0; i < timeline->doubts->len; i++) {
        const RfStateDoubt *d = &g_array_index(timeline->doubts, RfStateDoubt, i);
        if (fmin(end_s, d->end_s) - fmax(start_s, d->start_s) > brief_s) return true;
    }
    return false;
}

/* A switch from one polarity to the other within a bin looks like a bin without field: labels of runs of a single bin
 * between two different states are given up in favour of their longer neighbours. */
static void heal_labels(const RfFieldRuns *runs, unsigned *label)
{
    for (size_t r = 1; r + 1 < runs->runs; r++) {
        bool is_short = runs->edge_s[r + 1] - runs->edge_s[r] < 1.5 * runs->bin_s;
        bool is_alone = label[r] != label[r - 1] && label[r] != label[r + 1] && label[r - 1] != label[r + 1];
        if (is_short && is_alone) label[r] = label[r - 1];
    }
}

/* The run that ends (or begins) at an edge. */
static size_t run_ending_at(const RfFieldRuns *runs, double edge_s)
{
    size_t r = 0;
    while (r + 1 < runs->runs && runs->edge_s[r + 1] < edge_s - 1e-9) r++;
    return r;
}

/* The runs nearest to a switch that are long enough to show a speed, on either side and in the same interval. */
static bool runs_beside(const RfFieldTimeline *timeline, unsigned number, const RfFieldRuns *runs,
                        size_t *before, size_t *after)
{
    static const double watched_s = 0.35;
    const RfFieldInterval *v = &g_array_index(timeline->intervals, RfFieldInterval, number);
    size_t at = run_ending_at(runs, v->end_s), a = at, b = at + 1;
    while (a > 0 && runs->edge_s[a + 1] - runs->edge_s[a] < watched_s && runs->edge_s[a] > v[0].start_s) a--;
    while (b + 1 < runs->runs && runs->edge_s[b + 1] - runs->edge_s[b] < watched_s &&
           runs->edge_s[b + 1] < v[1].end_s)
        b++;
    *before = a;
    *after = b;
    return b < runs->runs;
}

/* Before there are fits, a droplet's speeds in the runs on either side of a switch tell when it was. */
static void refine_roughly(RfFieldTimeline *timeline, unsigned number, const RfTrail *trails,
                           const RfFieldRuns *runs)
{
    static const double watched_s = 0.35;
    const RfFieldInterval *before = &g_array_index(timeline->intervals, RfFieldInterval, number);
    size_t run_a, run_b, n = runs->droplets;
    double change_v = before[1].voltage_v - before[0].voltage_v, forever = HUGE_VAL;
    if (change_v == 0 || !runs_beside(timeline, number, runs, &run_a, &run_b)) return;
    g_autofree RfSwitchWitness *witnesses = g_new0(RfSwitchWitness, n);
    g_autofree double *per_volt = g_new(double, 2 * n);
    for (size_t j = 0; j < n; j++) {
        const RfRunSpeed *a = rf_field_runs_speed(runs, j, run_a), *b = rf_field_runs_speed(runs, j, run_b);
        if (a->time_s < watched_s || b->time_s < watched_s) continue;
        per_volt[2 * j] = (b->speed_m_s - a->speed_m_s) / change_v;
        per_volt[2 * j + 1] = sqrt(a->variance_m2_s2 + b->variance_m2_s2) / fabs(change_v);
        witnesses[j] = (RfSwitchWitness){.trail = &trails[j],
                                         .usable = true,
                                         .noise = {.diffusion_m2_s = runs->diffusion_m2_s[j]},
                                         .fall_m_s = a->speed_m_s - per_volt[2 * j] * before->voltage_v,
                                         .spells = 1,
                                         .spell_end_s = &forever,
                                         .speed_per_volt_m_s_v = &per_volt[2 * j],
                                         .u_speed_per_volt_m_s_v = &per_volt[2 * j + 1]};
    }
    rf_switch_instant_refine(timeline, number, witnesses, n);
}

RfFieldTimeline *rf_field_timeline_find(const RfTrail *fragments, size_t n_fragments,
                                        const RfFieldSheet *sheet, GError **error)
{
    g_autoptr(RfFieldTimeline) timeline = rf_field_timeline_new();
    g_autoptr(RfJoinedTrails) joined = rf_trail_join(fragments, n_fragments);
    const RfTrail *trails = joined->trails;
    size_t n = joined->n;
    g_autoptr(GArray) spans = NULL;
    RfFieldLevel levels[RF_FIELD_LEVELS];
    size_t n_levels = sheet_levels(sheet, levels);
    if (sheet->log_spans > 0) {
        spans = g_array_new(FALSE, TRUE, sizeof(RfLogSpan));
        g_array_append_vals(spans, sheet->log, (unsigned)sheet->log_spans);
        n_levels = rf_field_log_levels(spans, levels, n_levels);
    }
    g_autoptr(RfFieldRuns) runs = rf_field_runs_new(trails, n);
    g_autofree unsigned *label = g_new0(unsigned, runs->runs);
    g_autofree RfStateDroplet *droplets = g_new0(RfStateDroplet, n);
    g_autofree double *doubt = g_new(double, runs->runs);
    rf_field_states_label(runs, levels, n_levels, sheet->medium, label, doubt, droplets);
    heal_labels(runs, label);
    if (!spans) collect_doubts(timeline, runs, doubt);
    collect_intervals(timeline, runs, label, levels);
    for (unsigned k = 0; k < timeline->switches->len; k++) refine_roughly(timeline, k, trails, runs);
    rf_end_switch_settle(timeline, trails, runs, droplets, levels, n_levels);
    if (spans && !rf_field_log_apply(spans, sheet, runs, droplets, timeline, error)) return NULL;
    return g_steal_pointer(&timeline);
}

void rf_field_timeline_refine(RfFieldTimeline *timeline, const RfSwitchWitness *witnesses, size_t n)
{
    for (unsigned k = 0; k < timeline->switches->len; k++)
        rf_switch_instant_refine(timeline, k, witnesses, n);
    if (timeline->has_log) rf_field_log_audit(timeline, witnesses, n);
}
