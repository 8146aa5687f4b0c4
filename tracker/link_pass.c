#include "tracker/link_pass.h"

#include <math.h>

#include "tracker/assignment.h"

enum { established_hits = 5, least_hits = 3, newborn_misses = 2, apart_exposures = 3 };

static const double coast_s = 0.15; /* a chain unseen for longer ends; the second look may go on from there */
static const double missed_cost = 2; /* -log of the chance that a droplet is not seen in an exposure, about */
static const double tangle_part_of_gap = 0.8; /* of the longest gap, without any spot about it */
static const double longest_tangle_s = 2;
static const double lost_in_merge_px = 2;

typedef struct {
    RfMotion motion;
    RfChain *chain;
    int misses; /* usable exposures since the last hit */
    bool is_tangled;
} Live;

/* Droplets too near each other to be told apart: they go on unseen, spots about them are nobody's. */
typedef struct {
    GArray *members; /* of RfMotion */
    double since_s, last_seen_s;
    int apart; /* exposures in a row in which its spots stood apart */
} Tangle;

typedef struct {
    RfLinkScene *scene;
    GPtrArray *live, *tangles, *chains;
    GArray *edges;
    int *column_of_row, *row_of_column; /* columns: spots of the exposure, counted from its first */
    bool *is_consumed, *is_freed;       /* per column: held back for a tangle; just out of one */
    double limit;                       /* surprise beyond which a spot is more likely somebody else's */
} Pass;

static void tangle_free(void *tangle)
{
    g_array_unref(((Tangle *)tangle)->members);
    g_free(tangle);
}

static bool is_established(const Live *live)
{
    return live->chain->hits->len >= established_hits;
}

static Live *live_at(const Pass *pass, int i)
{
    return g_ptr_array_index(pass->live, i);
}

static const RfSight *sight_at(const Pass *pass, const RfExposure *exposure, int column)
{
    return &pass->scene->sights[(int)exposure->first_spot + column];
}

static void predict_all(Pass *pass, double dt_s, double field_s)
{
    for (unsigned i = 0; i < pass->live->len; i++)
        rf_motion_predict(&live_at(pass, (int)i)->motion, &pass->scene->model, dt_s, field_s);
    for (unsigned i = 0; i < pass->tangles->len; i++) {
        Tangle *tangle = g_ptr_array_index(pass->tangles, i);
        for (unsigned k = 0; k < tangle->members->len; k++)
            rf_motion_predict(&g_array_index(tangle->members, RfMotion, k), &pass->scene->model, dt_s,
                              field_s);
    }
}

static void add_edges(Pass *pass, int row, unsigned e)
{
    const RfLinkScene *scene = pass->scene;
    const RfExposure *exposure = rf_link_scene_exposure(scene, e);
    const RfMotion *m = &live_at(pass, row)->motion;
    double reach_px[2];
    rf_motion_reach(m, &scene->model, pass->limit, reach_px);
    unsigned end = exposure->first_spot + exposure->spots;
    for (unsigned k = rf_link_scene_first_from(scene, e, m->axis[1].position_px - reach_px[1]); k < end;
         k++) {
        int spot = scene->by_height[k];
        const RfSight *sight = &scene->sights[spot];
        if (sight->at_px[1] > m->axis[1].position_px + reach_px[1]) break;
        if (fabs(sight->at_px[0] - m->axis[0].position_px) > reach_px[0]) continue;
        double cost = rf_motion_surprise(m, &scene->model, sight, NULL) - pass->limit;
        RfAssignmentEdge edge = {row, spot - (int)exposure->first_spot, cost};
        if (cost < 0) g_array_append_val(pass->edges, edge);
    }
}

static void assign_spots(Pass *pass, unsigned e)
{
    int rows = (int)pass->live->len, columns = (int)rf_link_scene_exposure(pass->scene, e)->spots;
    g_array_set_size(pass->edges, 0);
    for (int row = 0; row < rows; row++) add_edges(pass, row, e);
    pass->column_of_row = g_renew(int, pass->column_of_row, rows + 1);
    rf_assignment_solve((const RfAssignmentEdge *)(const void *)pass->edges->data, pass->edges->len, rows,
                        columns, 0, pass->column_of_row);
    for (int i = 0; i < columns; i++) {
        pass->row_of_column[i] = -1;
        pass->is_consumed[i] = pass->is_freed[i] = false;
    }
    for (int row = 0; row < rows; row++)
        if (pass->column_of_row[row] >= 0) pass->row_of_column[pass->column_of_row[row]] = row;
}

static double spread_px(const RfMotion *m)
{
    return sqrt((m->axis[0].pp + m->axis[1].pp) / 2);
}

static bool are_near(const RfMotion *a, const RfMotion *b, double merge_px)
{
    double dx = a->axis[0].position_px - b->axis[0].position_px,
           dy = a->axis[1].position_px - b->axis[1].position_px;
    double variance_px2 = (a->axis[0].pp + a->axis[1].pp + b->axis[0].pp + b->axis[1].pp) / 2;
    double d2 = dx * dx + dy * dy;
    if (d2 > 2 * merge_px * merge_px + 8 * variance_px2) /* nearly all pairs: not worth a root */
        return false;
    return sqrt(d2) < merge_px + 2 * sqrt(variance_px2);
}

static void tangle_up(Pass *pass, Live *a, Live *b, double time_s)
{
    Tangle *tangle = g_new0(Tangle, 1);
    tangle->members = g_array_new(false, false, sizeof(RfMotion));
    tangle->since_s = tangle->last_seen_s = time_s;
    g_array_append_val(tangle->members, a->motion);
    g_array_append_val(tangle->members, b->motion);
    a->is_tangled = b->is_tangled = true;
    g_ptr_array_add(pass->tangles, tangle);
}

/* Seen beside the other for a while before it was lost. What was first seen as the other was last seen may be that very
 * droplet, caught up with after a jump. */
static bool was_beside(const Live *lost, const Live *other)
{
    const GArray *before = lost->chain->hits, *hits = other->chain->hits;
    return g_array_index(hits, RfHit, least_hits - 1).exposure <=
           g_array_index(before, RfHit, before->len - 1).exposure;
}

/* A droplet left without a spot beside another that has one: both may be in that spot. */
static void tangle_merged(Pass *pass, double time_s)
{
    for (unsigned i = 0; i < pass->live->len; i++) {
        Live *lost = live_at(pass, (int)i);
        if (pass->column_of_row[i] >= 0 || lost->is_tangled || !is_established(lost)) continue;
        for (unsigned j = 0; j < pass->live->len; j++) {
            Live *other = live_at(pass, (int)j);
            if (j == i || other->is_tangled || !is_established(other) || pass->column_of_row[j] < 0) continue;
            if (was_beside(lost, other) && are_near(&lost->motion, &other->motion, pass->scene->merge_px)) {
                tangle_up(pass, lost, other, time_s);
                break;
            }
        }
    }
}

/* Cost of one edge; 0 (no better than none) if it isn't there. Edges lie in order of rows. */
static double edge_cost(const Pass *pass, int row, int column)
{
    unsigned low = 0, high = pass->edges->len;
    while (low < high) {
        unsigned middle = low + (high - low) / 2;
        if (g_array_index(pass->edges, RfAssignmentEdge, middle).row < row)
            low = middle + 1;
        else
            high = middle;
    }
    for (; low < pass->edges->len && g_array_index(pass->edges, RfAssignmentEdge, low).row == row; low++)
        if (g_array_index(pass->edges, RfAssignmentEdge, low).column == column)
            return g_array_index(pass->edges, RfAssignmentEdge, low).cost;
    return 0;
}

/* Two droplets, two spots, and the other way round is nearly as likely. */
static void tangle_exchangeable(Pass *pass, double time_s)
{
    for (unsigned k = 0; k < pass->edges->len; k++) {
        RfAssignmentEdge edge = g_array_index(pass->edges, RfAssignmentEdge, k);
        int i = edge.row, j = pass->row_of_column[edge.column];
        if (j < 0 || j == i || pass->column_of_row[i] < 0) continue;
        Live *a = live_at(pass, i), *b = live_at(pass, j);
        if (a->is_tangled || b->is_tangled || !is_established(a) || !is_established(b)) continue;
        double back = edge_cost(pass, j, pass->column_of_row[i]);
        double now = edge_cost(pass, i, pass->column_of_row[i]) + edge_cost(pass, j, edge.column);
        if (back < 0 && edge.cost + back - now < pass->scene->options.decision_log_odds)
            tangle_up(pass, a, b, time_s);
    }
}

/* A droplet that comes upon a tangle and finds no spot of its own joins it. */
static void join_tangles(Pass *pass)
{
    for (unsigned t = 0; t < pass->tangles->len; t++) {
        Tangle *tangle = g_ptr_array_index(pass->tangles, t);
        for (unsigned i = 0; i < pass->live->len; i++) {
            Live *live = live_at(pass, (int)i);
            if (live->is_tangled || !is_established(live) || pass->column_of_row[i] >= 0) continue;
            for (unsigned k = 0; k < tangle->members->len && !live->is_tangled; k++)
                live->is_tangled = are_near(&live->motion, &g_array_index(tangle->members, RfMotion, k),
                                            pass->scene->merge_px);
            if (live->is_tangled) g_array_append_val(tangle->members, live->motion);
        }
    }
}

static bool is_about(const Tangle *tangle, const RfSight *sight, double merge_px)
{
    for (unsigned k = 0; k < tangle->members->len; k++) {
        const RfMotion *m = &g_array_index(tangle->members, RfMotion, k);
        double dx = sight->at_px[0] - m->axis[0].position_px, dy = sight->at_px[1] - m->axis[1].position_px;
        if (hypot(dx, dy) < merge_px + 3 * spread_px(m)) return true;
    }
    return false;
}

static bool are_apart(const Pass *pass, const RfExposure *exposure, const GArray *columns)
{
    for (unsigned i = 0; i < columns->len; i++)
        for (unsigned j = 0; j < i; j++) {
            const RfSight *a = sight_at(pass, exposure, g_array_index(columns, int, i));
            const RfSight *b = sight_at(pass, exposure, g_array_index(columns, int, j));
            if (hypot(a->at_px[0] - b->at_px[0], a->at_px[1] - b->at_px[1]) < pass->scene->merge_px)
                return false;
        }
    return true;
}

/* A droplet that may be anywhere holds nothing together. */
static bool is_lost(const Pass *pass, const Tangle *tangle)
{
    for (unsigned k = 0; k < tangle->members->len; k++)
        if (spread_px(&g_array_index(tangle->members, RfMotion, k)) >
            lost_in_merge_px * pass->scene->merge_px)
            return true;
    return false;
}

static bool is_tangle_over(const Pass *pass, const Tangle *tangle, double time_s)
{
    return tangle->apart >= apart_exposures || is_lost(pass, tangle) ||
           time_s - tangle->since_s > longest_tangle_s ||
           time_s - tangle->last_seen_s > tangle_part_of_gap * pass->scene->options.longest_gap_s;
}

/* Keeps the spots about a tangle from becoming newcomers, until there is one for each and they stay apart. */
static bool tangle_holds(Pass *pass, Tangle *tangle, const RfExposure *exposure)
{
    g_autoptr(GArray) columns = g_array_new(false, false, sizeof(int));
    for (int c = 0; c < (int)exposure->spots; c++)
        if (pass->row_of_column[c] < 0 && !pass->is_consumed[c] &&
            is_about(tangle, sight_at(pass, exposure, c), pass->scene->merge_px))
            g_array_append_val(columns, c);
    if (columns->len > 0) tangle->last_seen_s = exposure->time_s;
    bool is_apart = columns->len >= tangle->members->len && are_apart(pass, exposure, columns);
    tangle->apart = is_apart ? tangle->apart + 1 : 0;
    bool is_over = is_tangle_over(pass, tangle, exposure->time_s);
    for (unsigned i = 0; i < columns->len; i++)
        (is_over ? pass->is_freed : pass->is_consumed)[g_array_index(columns, int, i)] = true;
    return !is_over;
}

static void tend_tangles(Pass *pass, const RfExposure *exposure)
{
    for (unsigned t = 0; t < pass->tangles->len;)
        if (tangle_holds(pass, g_ptr_array_index(pass->tangles, t), exposure))
            t++;
        else
            g_ptr_array_remove_index(pass->tangles, t);
}

static void append_hit(RfChain *chain, unsigned exposure, int spot)
{
    RfHit hit = {exposure, spot};
    g_array_append_val(chain->hits, hit);
}

static void feed(Pass *pass, unsigned e)
{
    const RfExposure *exposure = rf_link_scene_exposure(pass->scene, e);
    for (unsigned i = 0; i < pass->live->len; i++) {
        Live *live = live_at(pass, (int)i);
        int column = pass->column_of_row[i];
        if (live->is_tangled) {
            if (column >= 0) pass->row_of_column[column] = -1; /* the tangle's now */
            continue;
        }
        live->misses++;
        if (column < 0) continue;
        bool is_changed;
        const RfSight *sight = sight_at(pass, exposure, column);
        rf_motion_surprise(&live->motion, &pass->scene->model, sight, &is_changed);
        if (is_changed) rf_motion_loosen(&live->motion, &pass->scene->model);
        rf_motion_update(&live->motion, sight);
        append_hit(live->chain, e, (int)exposure->first_spot + column);
        live->misses = 0;
    }
}

static void give_birth(Pass *pass, unsigned e)
{
    const RfExposure *exposure = rf_link_scene_exposure(pass->scene, e);
    for (int c = 0; c < (int)exposure->spots; c++) {
        if (pass->row_of_column[c] >= 0 || pass->is_consumed[c]) continue;
        Live *live = g_new0(Live, 1);
        live->chain = rf_chain_new(pass->scene);
        live->chain->is_cut_before = pass->is_freed[c];
        append_hit(live->chain, e, (int)exposure->first_spot + c);
        rf_motion_start(&live->motion, &pass->scene->model, sight_at(pass, exposure, c), 1);
        g_ptr_array_add(pass->live, live);
    }
}

/* Ends a life: long enough chains are kept. */
static void bury(Pass *pass, Live *live)
{
    live->chain->is_cut_after = live->is_tangled;
    if (live->chain->hits->len >= least_hits)
        g_ptr_array_add(pass->chains, live->chain);
    else
        rf_chain_free(live->chain);
    g_free(live);
}

static bool is_over(const Pass *pass, const Live *live)
{
    if (live->is_tangled) return true;
    if (!is_established(live)) return live->misses >= newborn_misses;
    return live->misses > 0 && live->motion.unseen_s > fmax(coast_s, 2.5 * pass->scene->exposure_s);
}

static void bury_the_dead(Pass *pass)
{
    unsigned kept = 0;
    for (unsigned i = 0; i < pass->live->len; i++) {
        Live *live = live_at(pass, (int)i);
        if (is_over(pass, live))
            bury(pass, live);
        else
            g_ptr_array_index(pass->live, kept++) = live;
    }
    g_ptr_array_set_size(pass->live, (int)kept);
}

static void look_at(Pass *pass, unsigned e)
{
    const RfExposure *exposure = rf_link_scene_exposure(pass->scene, e);
    assign_spots(pass, e);
    join_tangles(pass);
    tangle_merged(pass, exposure->time_s);
    tangle_exchangeable(pass, exposure->time_s);
    feed(pass, e);
    tend_tangles(pass, exposure);
    bury_the_dead(pass);
    give_birth(pass, e);
}

static Pass *pass_new(RfLinkScene *scene)
{
    Pass *pass = g_new0(Pass, 1);
    unsigned most = 0;
    for (unsigned e = 0; e < scene->sightings->exposures->len; e++)
        most = MAX(most, rf_link_scene_exposure(scene, e)->spots);
    pass->scene = scene;
    pass->live = g_ptr_array_new();
    pass->tangles = g_ptr_array_new_with_free_func(tangle_free);
    pass->chains = g_ptr_array_new_with_free_func((GDestroyNotify)rf_chain_free);
    pass->edges = g_array_new(false, false, sizeof(RfAssignmentEdge));
    pass->row_of_column = g_new(int, most + 1);
    pass->is_consumed = g_new(bool, most + 1);
    pass->is_freed = g_new(bool, most + 1);
    pass->limit = missed_cost - log(scene->newcomers_px2);
    return pass;
}

static GPtrArray *pass_end(Pass *pass)
{
    for (unsigned i = 0; i < pass->live->len; i++) bury(pass, live_at(pass, (int)i));
    GPtrArray *chains = pass->chains;
    g_ptr_array_unref(pass->live);
    g_ptr_array_unref(pass->tangles);
    g_array_unref(pass->edges);
    g_free(pass->column_of_row);
    g_free(pass->row_of_column);
    g_free(pass->is_consumed);
    g_free(pass->is_freed);
    g_free(pass);
    return chains;
}

/* By first exposure, then first spot: the order in which people would number them. */
static int compare_chains(const void *a, const void *b)
{
    const RfHit *x = &g_array_index((*(RfChain *const *)a)->hits, RfHit, 0);
    const RfHit *y = &g_array_index((*(RfChain *const *)b)->hits, RfHit, 0);
    return x->exposure != y->exposure ? (x->exposure < y->exposure ? -1 : 1) : x->spot - y->spot;
}

static void claim_spots(RfLinkScene *scene, const GPtrArray *chains)
{
    for (unsigned i = 0; i < chains->len; i++) {
        const RfChain *chain = g_ptr_array_index(chains, i);
        for (unsigned k = 0; k < chain->hits->len; k++)
            scene->is_claimed[g_array_index(chain->hits, RfHit, k).spot] = true;
    }
}

GPtrArray *rf_link_pass_run(RfLinkScene *scene)
{
    Pass *pass = pass_new(scene);
    double last_s = 0;
    for (unsigned e = 0; e < scene->sightings->exposures->len; e++) {
        double time_s = rf_link_scene_exposure(scene, e)->time_s;
        predict_all(pass, time_s - last_s, rf_field_course_integral_s(scene->field, last_s, time_s));
        last_s = time_s;
        if (scene->is_usable[e]) look_at(pass, e);
    }
    GPtrArray *chains = pass_end(pass);
    g_ptr_array_sort(chains, compare_chains);
    claim_spots(scene, chains);
    return chains;
}
