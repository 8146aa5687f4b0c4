#include "physics/end_switch.h"

#include <math.h>

#include "physics/switch_instant.h"

/* Less than this at an end is judged here. */
static const double BRIEF_S = 0.35;
/* Gain in log-likelihood for a switch: its instant, its level, and the price of any switch. A droplet's part is bounded by
 * 7, so that one alone, which may have changed its charge, can't decide. */
static const double GAIN_MIN = 12;
/* Where the labels had a switch there already, only which one it was is in question. */
static const double GAIN_MIN_LABELLED = 4;

typedef struct {
    RfFieldTimeline *timeline;
    bool is_start; /* which end */
} End;

static RfFieldInterval *interval_at(const RfFieldTimeline *timeline, unsigned k)
{
    return &g_array_index(timeline->intervals, RfFieldInterval, k);
}

/* The brief interval at this end is given back to its neighbour. */
static bool give_up_brief(const End *end)
{
    GArray *intervals = end->timeline->intervals;
    if (intervals->len < 2) return false;
    unsigned brief = end->is_start ? 0 : intervals->len - 1, beside = end->is_start ? 1 : brief - 1;
    const RfFieldInterval *v = interval_at(end->timeline, brief);
    if (v->end_s - v->start_s >= BRIEF_S) return false;
    if (end->is_start)
        interval_at(end->timeline, beside)->start_s = v->start_s;
    else
        interval_at(end->timeline, beside)->end_s = v->end_s;
    g_array_remove_index(intervals, brief);
    g_array_remove_index(end->timeline->switches, end->is_start ? 0 : brief - 1);
    return true;
}

/* A level for the last moment at this end; returns the new switch's number. */
static unsigned put_in(const End *end, const RfFieldLevel *level)
{
    GArray *intervals = end->timeline->intervals;
    unsigned beside = end->is_start ? 0 : intervals->len - 1;
    RfFieldInterval *old = interval_at(end->timeline, beside), more = *old;
    double moment_s = fmin(BRIEF_S, old->end_s - old->start_s) / 2;
    more.state = level->state;
    more.voltage_v = level->voltage_v;
    RfFieldSwitch s = {.from = old->state, .to = level->state, .change_v = level->voltage_v - old->voltage_v};
    if (end->is_start) {
        s = (RfFieldSwitch){.from = level->state, .to = old->state, .change_v = -s.change_v};
        old->start_s = more.end_s = s.time_s.value = old->start_s + moment_s;
        g_array_prepend_val(intervals, more);
        g_array_prepend_val(end->timeline->switches, s);
        return 0;
    }
    old->end_s = more.start_s = s.time_s.value = old->end_s - moment_s;
    g_array_append_val(intervals, more);
    g_array_append_val(end->timeline->switches, s);
    return end->timeline->switches->len - 1;
}

static void take_out(const End *end)
{
    GArray *intervals = end->timeline->intervals;
    unsigned at = end->is_start ? 0 : intervals->len - 1;
    if (end->is_start)
        interval_at(end->timeline, 1)->start_s = interval_at(end->timeline, 0)->start_s;
    else
        interval_at(end->timeline, at - 1)->end_s = interval_at(end->timeline, at)->end_s;
    g_array_remove_index(intervals, at);
    g_array_remove_index(end->timeline->switches, end->is_start ? 0 : at - 1);
}

/* Speeds of the long run at this end, and per volt as the labels have it. */
static void fill_witnesses(const End *end, const RfTrail *trails, const RfFieldRuns *runs,
                           const RfStateDroplet *droplets, double *per_volt, RfSwitchWitness *witnesses)
{
    static const double forever = HUGE_VAL;
    const RfFieldInterval *v =
        interval_at(end->timeline, end->is_start ? 0 : end->timeline->intervals->len - 1);
    for (size_t j = 0; j < runs->droplets; j++) {
        double moved_m = 0, time_s = 0;
        for (size_t r = runs->span[j].first; r < runs->span[j].end; r++) {
            const RfRunSpeed *seen = rf_field_runs_speed(runs, j, r);
            bool is_inside = runs->edge_s[r] >= v->start_s + (end->is_start ? BRIEF_S : -0.05) &&
                             runs->edge_s[r + 1] <= v->end_s - (end->is_start ? -0.05 : BRIEF_S);
            if (!is_inside) continue;
            moved_m += seen->speed_m_s * seen->time_s;
            time_s += seen->time_s;
        }
        per_volt[2 * j] = droplets[j].speed_per_volt_m_s_v;
        per_volt[2 * j + 1] = droplets[j].u_speed_per_volt_m_s_v;
        double fall_m_s =
            time_s > 1 ? moved_m / time_s - per_volt[2 * j] * v->voltage_v : droplets[j].fall_m_s;
        witnesses[j] = (RfSwitchWitness){.trail = &trails[j],
                                         .usable = fabs(per_volt[2 * j]) > 3 * per_volt[2 * j + 1],
                                         .noise = {.diffusion_m2_s = runs->diffusion_m2_s[j]},
                                         .fall_m_s = fall_m_s,
                                         .spells = 1,
                                         .spell_end_s = &forever,
                                         .speed_per_volt_m_s_v = &per_volt[2 * j],
                                         .u_speed_per_volt_m_s_v = &per_volt[2 * j + 1]};
    }
}

static void settle(const End *end, const RfSwitchWitness *witnesses, size_t n, const RfFieldLevel *levels,
                   size_t n_levels, double gain_min)
{
    const RfFieldTimeline *timeline = end->timeline;
    const RfFieldInterval now = *interval_at(timeline, end->is_start ? 0 : timeline->intervals->len - 1);
    double best = 0;
    const RfFieldLevel *to = NULL;
    for (size_t l = 0; l < n_levels; l++) {
        if (levels[l].voltage_v == now.voltage_v) continue;
        if (end->is_start && levels[l].order > 0) continue; /* the sheet names what came first */
        unsigned number = put_in(end, &levels[l]);
        RfSwitchGain gain = rf_switch_instant_gain(end->timeline, number, witnesses, n, end->is_start);
        take_out(end);
        if (!(gain.bounded > gain_min) || !(gain.open > best)) continue;
        best = gain.open;
        to = &levels[l];
    }
    if (to) rf_switch_instant_refine(end->timeline, put_in(end, to), witnesses, n);
}

void rf_end_switch_settle(RfFieldTimeline *timeline, const RfTrail *trails, const RfFieldRuns *runs,
                          const RfStateDroplet *droplets, const RfFieldLevel *levels, size_t n_levels)
{
    g_autofree RfSwitchWitness *witnesses = g_new0(RfSwitchWitness, runs->droplets);
    g_autofree double *per_volt = g_new(double, 2 * runs->droplets);
    for (int start = 0; start < 2; start++) {
        const End end = {timeline, start == 1};
        double gain_min = give_up_brief(&end) ? GAIN_MIN_LABELLED : GAIN_MIN;
        fill_witnesses(&end, trails, runs, droplets, per_volt, witnesses);
        settle(&end, witnesses, runs->droplets, levels, n_levels, gain_min);
    }
}
