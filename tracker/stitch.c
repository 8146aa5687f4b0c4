#include "tracker/stitch.h"

#include <math.h>

#include "tracker/assignment.h"

/* A chain's two ends, as others see them. */
typedef struct {
    RfMotion forward;    /* at the last hit, from the past */
    RfMotion backward;   /* at the first hit, from the future alone */
    unsigned start, end; /* exposures */
    double start_s, end_s;
    double entry_s, exit_s; /* from the picture's border to the first hit, from the last hit to the border */
    double peak_start, peak_end;
    bool is_cut_before, is_cut_after;
} Ends;

typedef struct {
    const RfLinkScene *scene;
    const GPtrArray *chains;
    Ends *ends;
    int *by_start;       /* chains in order of start_s */
    double starts_px2_s; /* chains that begin, per square pixel and second */
    double longest_gap_s;
    GArray *edges;
} Stitch;

enum { peak_hits = 10 };

/* Brightness within one droplet changes with focus, between droplets with size: in the logarithm, one standard deviation. */
static const double peak_sd_same = 0.35, peak_sd_other = 0.9;
static const double reappear_s = 0.3; /* typical length of a gap */
static const double border_s =
    0.15; /* between last sight and border a droplet is unseen for so long at most */
static const double tangled_s =
    2.5; /* two droplets in one spot are not out of view: they may stay so for this long */
static const double outshining = 3; /* times as bright: more than two alike in one spot */
static const double far_prior = 10; /* in units of what is expected: as good as knowing nothing */

/* Time for which a droplet, last seen there, is still inside the picture though no longer seen; 0 if it isn't leaving. */
static double border_time_s(const RfLinkScene *scene, const RfHit *hit, const RfMotion *m, int direction)
{
    const RfSpot *spot = rf_link_scene_spot(scene, hit->spot);
    double state = rf_field_course_state(scene->field, rf_link_scene_exposure(scene, hit->exposure)->time_s);
    double at_px[2] = {(double)spot->x_px, (double)spot->y_px};
    double far_px[2] = {scene->sightings->width - 0.5, scene->sightings->height - 0.5};
    double least_s = 0;
    for (int k = 0; k < 2; k++) {
        double v = direction * (m->axis[k].velocity_px_s + state * m->axis[k].response_px_s);
        double way_px = fmax(0, v > 0 ? far_px[k] - at_px[k] : at_px[k] + 0.5);
        if (way_px < 2 * scene->merge_px)
            least_s = fmax(least_s, fmin(border_s, way_px / fmax(fabs(v), 1e-6)));
    }
    return least_s;
}

static Ends look_at_ends(const RfLinkScene *scene, const RfChain *chain)
{
    Ends ends = {
        .forward = rf_chain_end_state(scene, chain, false, 1),
        .backward = rf_chain_end_state(scene, chain, true, far_prior),
        .start = rf_chain_first(chain),
        .end = rf_chain_last(chain),
        .start_s = rf_chain_start_s(scene, chain),
        .end_s = rf_chain_end_s(scene, chain),
        .peak_start = rf_chain_log_peak(scene, chain, false, peak_hits),
        .peak_end = rf_chain_log_peak(scene, chain, true, peak_hits),
        .is_cut_before = chain->is_cut_before,
        .is_cut_after = chain->is_cut_after,
    };
    const RfHit *hits = (const RfHit *)(const void *)chain->hits->data;
    ends.exit_s = border_time_s(scene, &hits[chain->hits->len - 1], &ends.forward, 1);
    ends.entry_s = border_time_s(scene, &hits[0], &ends.backward, -1);
    return ends;
}

static bool is_field_on_between(const RfLinkScene *scene, double from_s, double to_s)
{
    return !rf_field_course_is_known(scene->field) || rf_field_course_state(scene->field, from_s) != 0 ||
           rf_field_course_state(scene->field, to_s) != 0;
}

static double peak_likeness(double difference)
{
    double same = difference / peak_sd_same, other = difference / peak_sd_other;
    return fmax(-3, (other * other - same * same) / 2 + log(peak_sd_other / peak_sd_same));
}

/* log odds that b goes on where a ends, against b being a newcomer. */
static double join_log_odds(const Stitch *stitch, const Ends *a, const Ends *b)
{
    const RfLinkScene *scene = stitch->scene;
    RfMotion carried = a->forward;
    rf_chain_carry(scene, &scene->model, &carried, a->end_s, b->start_s);
    double odds = rf_motion_likeness(&carried, &b->backward, &scene->model,
                                     is_field_on_between(scene, a->end_s, b->start_s));
    double gap_s = b->start_s - a->end_s;
    return odds + peak_likeness(b->peak_start - a->peak_end) - log(stitch->starts_px2_s) - log(reappear_s) -
           gap_s / reappear_s;
}

/* Quick refusal: nobody travels that far. */
static bool is_in_reach(const Stitch *stitch, const Ends *a, const Ends *b)
{
    double gap_s = b->start_s - a->end_s;
    for (int k = 0; k < 2; k++) {
        double reach_px = 8 * stitch->scene->model.velocity_sd_px_s[k] * gap_s +
                          6 * sqrt(stitch->scene->model.noise.spread_px2_s * gap_s) +
                          2 * stitch->scene->merge_px;
        if (fabs(b->backward.axis[k].position_px - a->forward.axis[k].position_px) > reach_px) return false;
    }
    return true;
}

static unsigned first_after(const Stitch *stitch, double time_s)
{
    unsigned low = 0, high = stitch->chains->len;
    while (low < high) {
        unsigned middle = low + (high - low) / 2;
        if (stitch->ends[stitch->by_start[middle]].start_s <= time_s)
            low = middle + 1;
        else
            high = middle;
    }
    return low;
}

static bool is_spot_near(const RfLinkScene *scene, unsigned e, const double at_px[2], double radius_px,
                         double least_log_peak)
{
    const RfExposure *exposure = rf_link_scene_exposure(scene, e);
    unsigned end = exposure->first_spot + exposure->spots;
    for (unsigned k = rf_link_scene_first_from(scene, e, at_px[1] - radius_px); k < end; k++) {
        const RfSight *sight = &scene->sights[scene->by_height[k]];
        if (sight->at_px[1] > at_px[1] + radius_px) return false;
        if (fabs(sight->at_px[0] - at_px[0]) < radius_px && sight->log_peak > least_log_peak) return true;
    }
    return false;
}

/* Longest time between a's end and b's start without any spot so bright near the straight way from one to the other. */
static double darkest_s(const Stitch *stitch, const Ends *a, const Ends *b, double least_log_peak)
{
    const RfLinkScene *scene = stitch->scene;
    double radius_px = 2 * scene->merge_px, last_s = a->end_s, darkest = 0;
    for (unsigned e = a->end; e <= b->start; e++) {
        double time_s = rf_link_scene_exposure(scene, e)->time_s;
        double part = (time_s - a->end_s) / (b->start_s - a->end_s), at_px[2];
        for (int k = 0; k < 2; k++)
            at_px[k] = (1 - part) * a->forward.axis[k].position_px + part * b->backward.axis[k].position_px;
        if (!is_spot_near(scene, e, at_px, radius_px, least_log_peak)) continue;
        darkest = fmax(darkest, time_s - last_s);
        last_s = time_s;
    }
    return fmax(darkest, b->start_s - last_s);
}

/* Whether b may be a, unseen because it was in another's spot. Into one that outshines it, it may go, or come out of it,
 * unnoticed: seen now and then, not long enough to be anybody. One end must be known to be there. */
static bool may_be_hidden(const Stitch *stitch, const Ends *a, const Ends *b)
{
    double longest_s = stitch->longest_gap_s;
    if (!(a->is_cut_after || b->is_cut_before) || b->start_s - a->end_s >= tangled_s) return false;
    bool is_noticed = a->is_cut_after && b->is_cut_before;
    double least_log_peak = fmax(a->peak_end, b->peak_start) + log(outshining);
    return darkest_s(stitch, a, b, is_noticed ? -HUGE_VAL : least_log_peak) < longest_s;
}

/* Whether the time for which nothing of it was seen lets b be a still. */
static bool is_in_time(const Stitch *stitch, const Ends *a, const Ends *b)
{
    double longest_s = stitch->longest_gap_s, gap_s = b->start_s - a->end_s;
    double unseen_s = gap_s - stitch->scene->exposure_s / 2 - a->exit_s - b->entry_s;
    return unseen_s <= longest_s || may_be_hidden(stitch, a, b);
}

static void collect_joins(Stitch *stitch)
{
    double most_s = fmax(tangled_s, stitch->longest_gap_s + 2 * border_s);
    for (unsigned i = 0; i < stitch->chains->len; i++) {
        const Ends *a = &stitch->ends[i];
        for (unsigned k = first_after(stitch, a->end_s); k < stitch->chains->len; k++) {
            int j = stitch->by_start[k];
            const Ends *b = &stitch->ends[j];
            if (b->start_s > a->end_s + most_s) break;
            if (!is_in_time(stitch, a, b) || !is_in_reach(stitch, a, b)) continue;
            RfAssignmentEdge edge = {(int)i, j, -join_log_odds(stitch, a, b)};
            if (edge.cost < 0) g_array_append_val(stitch->edges, edge);
        }
    }
}

static int compare_starts(const void *a, const void *b, void *data)
{
    const Ends *ends = data;
    int i = *(const int *)a, j = *(const int *)b;
    return ends[i].start_s < ends[j].start_s ? -1 : ends[i].start_s > ends[j].start_s ? 1 : i - j;
}

static Stitch *stitch_new(const RfLinkScene *scene, const GPtrArray *chains, double longest_gap_s)
{
    Stitch *stitch = g_new0(Stitch, 1);
    stitch->scene = scene;
    stitch->chains = chains;
    stitch->longest_gap_s = longest_gap_s;
    stitch->edges = g_array_new(false, false, sizeof(RfAssignmentEdge));
    stitch->ends = g_new0(Ends, chains->len + 1);
    stitch->by_start = g_new(int, chains->len + 1);
    for (unsigned i = 0; i < chains->len; i++) {
        stitch->ends[i] = look_at_ends(scene, g_ptr_array_index(chains, i));
        stitch->by_start[i] = (int)i;
    }
    g_qsort_with_data(stitch->by_start, (int)chains->len, sizeof(int), compare_starts, stitch->ends);
    unsigned n = scene->sightings->exposures->len;
    double duration_s = n ? rf_link_scene_exposure(scene, n - 1)->time_s + scene->exposure_s : 1;
    stitch->starts_px2_s = (chains->len + 1.0) / (scene->area_px2 * duration_s);
    return stitch;
}

static void stitch_free(Stitch *stitch)
{
    g_array_unref(stitch->edges);
    g_free(stitch->ends);
    g_free(stitch->by_start);
    g_free(stitch);
}

/* Cost of a possible join; 0 if it isn't listed, as if left undone. */
static double join_cost(const Stitch *stitch, int row, int column)
{
    for (unsigned k = 0; k < stitch->edges->len; k++) {
        const RfAssignmentEdge *edge = &g_array_index(stitch->edges, RfAssignmentEdge, k);
        if (edge->row == row && edge->column == column) return edge->cost;
    }
    return 0;
}

/* Every listed join that was not chosen competes with one or two chosen ones: what would it cost to let it in, and give
 * what it displaces to each other? Where that is cheap, the chosen ones can't be trusted. */
static void mark_undecided(const Stitch *stitch, const int *column_of_row, const int *row_of_column,
                           bool *is_undecided)
{
    for (unsigned k = 0; k < stitch->edges->len; k++) {
        const RfAssignmentEdge *rival = &g_array_index(stitch->edges, RfAssignmentEdge, k);
        int column = column_of_row[rival->row], row = row_of_column[rival->column];
        if (column == rival->column || (column < 0 && row < 0)) continue;
        double now = (column >= 0 ? join_cost(stitch, rival->row, column) : 0) +
                     (row >= 0 ? join_cost(stitch, row, rival->column) : 0);
        double then = rival->cost + (row >= 0 && column >= 0 ? join_cost(stitch, row, column) : 0);
        if (then - now >= stitch->scene->options.decision_log_odds) continue;
        if (column >= 0) is_undecided[rival->row] = true;
        if (row >= 0) is_undecided[row] = true;
    }
}

static void join(RfChain *a, const RfChain *b)
{
    g_array_append_vals(a->hits, b->hits->data, b->hits->len);
    a->is_cut_after = b->is_cut_after;
}

/* Follows the chosen joins from every chain that nothing precedes. */
static void apply_joins(GPtrArray *chains, const int *next, const int *previous)
{
    g_autoptr(GPtrArray) kept = g_ptr_array_new();
    for (unsigned i = 0; i < chains->len; i++) {
        if (previous[i] >= 0) continue;
        RfChain *chain = g_ptr_array_index(chains, i);
        for (int j = next[i]; j >= 0; j = next[j]) join(chain, g_ptr_array_index(chains, j));
        g_ptr_array_add(kept, chain);
    }
    for (unsigned i = 0; i < chains->len; i++)
        if (previous[i] >= 0) rf_chain_free(g_ptr_array_index(chains, i));
    g_ptr_array_set_free_func(chains, NULL);
    g_ptr_array_set_size(chains, 0);
    g_ptr_array_extend(chains, kept, NULL, NULL);
    g_ptr_array_set_free_func(chains, (GDestroyNotify)rf_chain_free);
}

static unsigned stitch_once(const RfLinkScene *scene, GPtrArray *chains, double longest_gap_s)
{
    int n = (int)chains->len;
    Stitch *stitch = stitch_new(scene, chains, longest_gap_s);
    collect_joins(stitch);
    g_autofree int *next = g_new(int, n + 1), *previous = g_new(int, n + 1);
    g_autofree bool *is_undecided = g_new0(bool, n + 1);
    rf_assignment_solve((const RfAssignmentEdge *)(const void *)stitch->edges->data, stitch->edges->len, n, n,
                        0, next);
    for (int i = 0; i < n; i++) previous[i] = -1;
    for (int i = 0; i < n; i++)
        if (next[i] >= 0) previous[next[i]] = i;
    mark_undecided(stitch, next, previous, is_undecided);
    unsigned undecided = 0;
    for (int i = 0; i < n; i++) {
        if (next[i] < 0 || !is_undecided[i]) continue;
        ((RfChain *)g_ptr_array_index(chains, i))->is_cut_after = true;
        ((RfChain *)g_ptr_array_index(chains, next[i]))->is_cut_before = true;
        previous[next[i]] = -1;
        next[i] = -1;
        undecided++;
    }
    stitch_free(stitch);
    apply_joins(chains, next, previous);
    return undecided;
}

unsigned rf_stitch_chains(const RfLinkScene *scene, GPtrArray *chains)
{
    /* short gaps first: what they join knows more about itself when the long ones are judged */
    const double part_of_gap[] = {0.1, 0.4, 1, 1};
    unsigned undecided = 0;
    for (size_t i = 0; i < G_N_ELEMENTS(part_of_gap); i++)
        undecided = stitch_once(scene, chains, part_of_gap[i] * scene->options.longest_gap_s);
    return undecided;
}
