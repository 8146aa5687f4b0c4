#include "cli/preview_plan.h"

#include <math.h>
#include <string.h>

enum { MOST_MOMENT_FRAMES = 1600, MOST_STRETCH_FRAMES = RF_PREVIEW_MOST_FRAMES - MOST_MOMENT_FRAMES };

/* From generous to terse: the first that the budget allows is taken for all droplets alike. Below 2 s at 5 pictures a
 * second nobody recognises how a droplet moves. */
static const struct {
    double length_s, hz;
} TERMS[] = {{20, 10}, {12, 10}, {8, 10}, {8, 5}, {5, 5}, {3, 5}, {2, 5}};

static const double WHOLE_HZ = 10;

typedef struct {
    unsigned droplet;
    double start_s, stop_s;
    bool is_accepted;
} Life;

/* ---- spans ---- */

static int by_start(gconstpointer a, gconstpointer b)
{
    const double x = ((const RfPreviewSpan *)a)->start_s, y = ((const RfPreviewSpan *)b)->start_s;
    return (x > y) - (x < y);
}

/* Ascending and apart. */
static void merge(GArray *spans)
{
    g_array_sort(spans, by_start);
    guint kept = 0;
    for (guint i = 1; i < spans->len; i++) {
        const RfPreviewSpan next = g_array_index(spans, RfPreviewSpan, i);
        RfPreviewSpan *last = &g_array_index(spans, RfPreviewSpan, kept);
        if (next.start_s <= last->stop_s)
            last->stop_s = fmax(last->stop_s, next.stop_s);
        else
            g_array_index(spans, RfPreviewSpan, ++kept) = next;
    }
    if (spans->len) g_array_set_size(spans, kept + 1);
}

static double total_s(const GArray *spans)
{
    double sum = 0;
    for (guint i = 0; i < spans->len; i++) {
        const RfPreviewSpan *span = &g_array_index(spans, RfPreviewSpan, i);
        sum += span->stop_s - span->start_s;
    }
    return sum;
}

/* The first span that ends at or after time_s; len: none. */
static guint find(const GArray *spans, double time_s)
{
    guint low = 0, high = spans->len;
    while (low < high) {
        const guint middle = low + (high - low) / 2;
        if (g_array_index(spans, RfPreviewSpan, middle).stop_s < time_s)
            low = middle + 1;
        else
            high = middle;
    }
    return low;
}

static double next_in(const GArray *spans, double time_s)
{
    const guint i = find(spans, time_s);
    return i < spans->len ? fmax(time_s, g_array_index(spans, RfPreviewSpan, i).start_s) : HUGE_VAL;
}

/* ---- moments ---- */

static void add_moment(RfPreviewPlan *plan, RfMomentKind kind, unsigned number, unsigned droplet,
                       double time_s)
{
    const RfMoment moment = {.kind = kind, .number = number, .droplet = droplet, .time_s = time_s};
    if (isfinite(time_s) && time_s >= 0) g_array_append_val(plan->moments, moment);
}

static void add_timings(RfPreviewPlan *plan, const GArray *audit)
{
    for (guint i = 0; i < audit->len; i++) {
        const RfAuditRow *row = &g_array_index(audit, RfAuditRow, i);
        if (!row->finding || strcmp(row->finding, "agrees") == 0 || row->droplet == 0) continue;
        const double length_s = row->has_tracked ? row->tracked_time_s.value : row->hand_time_s.value;
        add_moment(plan, RF_MOMENT_TIMED_START, row->entry, row->droplet, row->start_s);
        add_moment(plan, RF_MOMENT_TIMED_STOP, row->entry, row->droplet, row->start_s + length_s);
    }
}

/* What matters most first: the budget is spent in this order. */
static void add_moments(RfPreviewPlan *plan, const RfResults *results)
{
    for (guint i = 0; i < results->steps->len; i++) {
        const RfStepRow *row = &g_array_index(results->steps, RfStepRow, i);
        add_moment(plan, RF_MOMENT_STEP, i + 1, row->droplet, row->time_s.value);
    }
    for (guint i = 0; i < results->switches->len; i++) {
        const RfSwitchRow *row = &g_array_index(results->switches, RfSwitchRow, i);
        add_moment(plan, RF_MOMENT_SWITCH, row->number, 0, row->time_s.value);
    }
    add_timings(plan, results->audit);
}

static void spend_on_moments(RfPreviewPlan *plan, double frame_rate_hz)
{
    const double half_s = 0.5 * RF_PREVIEW_MOMENT_FRAMES / frame_rate_hz;
    const guint most = MIN(plan->moments->len, (guint)(MOST_MOMENT_FRAMES / RF_PREVIEW_MOMENT_FRAMES));
    for (guint i = 0; i < most; i++) {
        const double at_s = g_array_index(plan->moments, RfMoment, i).time_s;
        const RfPreviewSpan span = {at_s - half_s, at_s + half_s};
        g_array_append_val(plan->every, span);
    }
    merge(plan->every);
}

/* ---- stretches ---- */

static bool is_accepted(const GArray *droplets, unsigned droplet)
{
    for (guint i = 0; i < droplets->len; i++) {
        const RfDropletRow *row = &g_array_index(droplets, RfDropletRow, i);
        if (row->droplet == droplet && row->accepted) return true;
    }
    return false;
}

/* (returns new) Accepted ones first, otherwise by number. */
static GArray *lives(const RfResults *results)
{
    GArray *all = g_array_new(FALSE, FALSE, sizeof(Life)), *others = g_array_new(FALSE, FALSE, sizeof(Life));
    const GArray *rows = results->paths;
    for (guint first = 0, end; first < rows->len; first = end) {
        const RfPathRow *row = &g_array_index(rows, RfPathRow, first);
        for (end = first; end < rows->len && g_array_index(rows, RfPathRow, end).droplet == row->droplet;)
            end++;
        const Life life = {row->droplet, row->time_s, g_array_index(rows, RfPathRow, end - 1).time_s,
                           is_accepted(results->droplets, row->droplet)};
        g_array_append_val(life.is_accepted ? all : others, life);
    }
    g_array_append_vals(all, others->data, others->len);
    g_array_unref(others);
    return all;
}

/* Around the first switch that the droplet is well in view for, since there it shows its charge; else its middle. */
static RfPreviewSpan telling(const Life *life, const GArray *switches, double length_s)
{
    double middle_s = 0.5 * (life->start_s + life->stop_s);
    for (guint i = 0; i < switches->len; i++) {
        const double at_s = g_array_index(switches, RfSwitchRow, i).time_s.value;
        if (at_s < life->start_s + 1 || at_s > life->stop_s - 1) continue;
        middle_s = at_s;
        break;
    }
    const double start_s =
        CLAMP(middle_s - length_s / 2, life->start_s, fmax(life->start_s, life->stop_s - length_s));
    return (RfPreviewSpan){start_s, fmin(life->stop_s, start_s + length_s)};
}

static void propose(RfPreviewPlan *plan, const RfResults *results, const GArray *droplets, guint n,
                    double length_s)
{
    g_array_set_size(plan->stretches, 0);
    for (guint i = 0; i < n; i++) {
        const RfPreviewSpan span = telling(&g_array_index(droplets, Life, i), results->switches, length_s);
        g_array_append_val(plan->stretches, span);
    }
    merge(plan->stretches);
}

static bool is_within_budget(const RfPreviewPlan *plan)
{
    return total_s(plan->stretches) * plan->stretch_hz <= MOST_STRETCH_FRAMES;
}

static RfPreviewSpan all_lives(const GArray *droplets)
{
    RfPreviewSpan all = {HUGE_VAL, -HUGE_VAL};
    for (guint i = 0; i < droplets->len; i++) {
        all.start_s = fmin(all.start_s, g_array_index(droplets, Life, i).start_s);
        all.stop_s = fmax(all.stop_s, g_array_index(droplets, Life, i).stop_s);
    }
    return all;
}

static void spend_on_stretches(RfPreviewPlan *plan, const RfResults *results)
{
    g_autoptr(GArray) droplets = lives(results);
    if (droplets->len == 0) return;
    const RfPreviewSpan all = all_lives(droplets);
    g_array_append_val(plan->stretches, all);
    plan->stretch_hz = WHOLE_HZ;
    if (is_within_budget(plan)) return;
    for (size_t i = 0; i < G_N_ELEMENTS(TERMS); i++) {
        plan->stretch_hz = TERMS[i].hz;
        propose(plan, results, droplets, droplets->len, TERMS[i].length_s);
        if (is_within_budget(plan)) return;
    }
    const double shortest_s = TERMS[G_N_ELEMENTS(TERMS) - 1].length_s;
    propose(plan, results, droplets,
            MIN(droplets->len, (guint)(MOST_STRETCH_FRAMES / (shortest_s * plan->stretch_hz))), shortest_s);
}

/* ---- the plan ---- */

RfPreviewPlan *rf_preview_plan_new(const RfResults *results, double frame_rate_hz)
{
    RfPreviewPlan *plan = g_new0(RfPreviewPlan, 1);
    plan->every = g_array_new(FALSE, FALSE, sizeof(RfPreviewSpan));
    plan->stretches = g_array_new(FALSE, FALSE, sizeof(RfPreviewSpan));
    plan->moments = g_array_new(FALSE, FALSE, sizeof(RfMoment));
    add_moments(plan, results);
    spend_on_moments(plan, frame_rate_hz);
    spend_on_stretches(plan, results);
    return plan;
}

void rf_preview_plan_free(RfPreviewPlan *plan)
{
    if (!plan) return;
    g_array_unref(plan->every);
    g_array_unref(plan->stretches);
    g_array_unref(plan->moments);
    g_free(plan);
}

bool rf_preview_plan_wants(const RfPreviewPlan *plan, double time_s, double previous_s)
{
    if (next_in(plan->every, time_s) <= time_s) return true;
    if (next_in(plan->stretches, time_s) > time_s) return false;
    return time_s - previous_s >= 0.999 / plan->stretch_hz; /* timestamps are rounded */
}

double rf_preview_plan_next_s(const RfPreviewPlan *plan, double time_s)
{
    return fmin(next_in(plan->every, time_s), next_in(plan->stretches, time_s));
}
