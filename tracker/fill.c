#include "tracker/fill.h"

#include <math.h>

#include "tracker/assignment.h"

static const double gate_d2 = 18; /* chi-squared with two degrees of freedom: one in 8000 droplets beyond */
static const double unseen_s = 0.35;       /* beyond an end, nothing seen for longer ends the search */
static const double missed_log_odds = 0.7; /* at its ends a droplet is missed as often as not */
static const double accepted_log_odds = 4;

double rf_fill_unclaimed_px2(const RfLinkScene *scene)
{
    double unclaimed = 0.05 * scene->sightings->exposures->len;
    for (unsigned i = 0; i < scene->sightings->spots->len; i++) unclaimed += !scene->is_claimed[i];
    return unclaimed / (fmax(1, scene->sightings->exposures->len) * scene->area_px2);
}

/* A chain's place in an exposure in which it was not seen. */
typedef struct {
    unsigned exposure, chain;
    RfSight place;
    int spot; /* given to it; -1: none */
} Vacancy;

static void collect_vacancies(const RfLinkScene *scene, const GPtrArray *chains, GArray *vacancies)
{
    for (unsigned c = 0; c < chains->len; c++) {
        const RfChain *chain = g_ptr_array_index(chains, c);
        unsigned first = rf_chain_first(chain), last = rf_chain_last(chain);
        if (chain->hits->len == last - first + 1) continue;
        g_autofree RfSight *smooth = rf_chain_smooth(scene, chain);
        for (unsigned e = first, k = 0; e <= last; e++) {
            if (g_array_index(chain->hits, RfHit, k).exposure == e) {
                k++;
                continue;
            }
            Vacancy vacancy = {e, c, smooth[e - first], -1};
            if (scene->is_usable[e]) g_array_append_val(vacancies, vacancy);
        }
    }
}

static int compare_vacancies(const void *a, const void *b)
{
    const Vacancy *x = a, *y = b;
    if (x->exposure != y->exposure) return x->exposure < y->exposure ? -1 : 1;
    return x->chain < y->chain ? -1 : x->chain > y->chain;
}

static double distance2(const RfSight *place, const RfSight *sight, double *surprise)
{
    double d2 = 0, determinant = 1;
    for (int k = 0; k < 2; k++) {
        double s = place->variance_px2[k] + sight->variance_px2[k];
        d2 += pow(place->at_px[k] - sight->at_px[k], 2) / s;
        determinant *= s;
    }
    *surprise = log(2 * G_PI) + (d2 + log(determinant)) / 2;
    return d2;
}

static void collect_offers(const RfLinkScene *scene, const GArray *vacancies, double limit, GArray *edges)
{
    for (unsigned v = 0; v < vacancies->len; v++) {
        const Vacancy *vacancy = &g_array_index(vacancies, Vacancy, v);
        const RfExposure *exposure = rf_link_scene_exposure(scene, vacancy->exposure);
        double reach_px = sqrt(gate_d2 * (vacancy->place.variance_px2[1] + 4));
        unsigned end = exposure->first_spot + exposure->spots;
        for (unsigned k =
                 rf_link_scene_first_from(scene, vacancy->exposure, vacancy->place.at_px[1] - reach_px);
             k < end; k++) {
            int spot = scene->by_height[k];
            if (scene->sights[spot].at_px[1] > vacancy->place.at_px[1] + reach_px) break;
            double surprise, d2 = distance2(&vacancy->place, &scene->sights[spot], &surprise);
            RfAssignmentEdge edge = {(int)v, spot, surprise - limit};
            if (!scene->is_claimed[spot] && d2 < gate_d2 && edge.cost < 0) g_array_append_val(edges, edge);
        }
    }
}

static double cost_to(const RfLinkScene *scene, const Vacancy *vacancy, int spot)
{
    double surprise;
    distance2(&vacancy->place, &scene->sights[spot], &surprise);
    return surprise;
}

/* Near enough, given how well the places are known, to have been seen as one. */
static bool may_merge(const RfLinkScene *scene, const RfSight *a, const RfSight *b)
{
    double dx = a->at_px[0] - b->at_px[0], dy = a->at_px[1] - b->at_px[1], d2 = dx * dx + dy * dy;
    double variance_px2 =
        (a->variance_px2[0] + a->variance_px2[1] + b->variance_px2[0] + b->variance_px2[1]) / 2;
    if (d2 >
        2 * scene->merge_px * scene->merge_px + 8 * variance_px2) /* nearly all pairs: not worth a root */
        return false;
    return sqrt(d2) < scene->merge_px + 2 * sqrt(variance_px2);
}

/* Two vacancies of one exposure, one spot between them, or two that could as well be exchanged. */
static bool is_doubtful(const RfLinkScene *scene, const Vacancy *a, const Vacancy *b)
{
    if (a->spot < 0 || b->spot < 0) return may_merge(scene, &a->place, &b->place);
    double now = cost_to(scene, a, a->spot) + cost_to(scene, b, b->spot);
    double exchanged = cost_to(scene, a, b->spot) + cost_to(scene, b, a->spot);
    return exchanged - now < scene->options.decision_log_odds;
}

static void settle_doubts(const RfLinkScene *scene, GArray *vacancies)
{
    g_autofree bool *is_refused = g_new0(bool, vacancies->len + 1);
    for (unsigned i = 0; i < vacancies->len; i++) {
        const Vacancy *a = &g_array_index(vacancies, Vacancy, i);
        for (unsigned j = i + 1; j < vacancies->len; j++) {
            const Vacancy *b = &g_array_index(vacancies, Vacancy, j);
            if (b->exposure != a->exposure) break;
            if ((a->spot >= 0 || b->spot >= 0) && is_doubtful(scene, a, b))
                is_refused[i] = is_refused[j] = true;
        }
    }
    for (unsigned i = 0; i < vacancies->len; i++)
        if (is_refused[i]) g_array_index(vacancies, Vacancy, i).spot = -1;
}

static int compare_hits(const void *a, const void *b)
{
    const RfHit *x = a, *y = b;
    return x->exposure < y->exposure ? -1 : x->exposure > y->exposure;
}

static void take_in(RfLinkScene *scene, GPtrArray *chains, const GArray *vacancies)
{
    g_autofree bool *is_changed = g_new0(bool, chains->len + 1);
    for (unsigned i = 0; i < vacancies->len; i++) {
        const Vacancy *vacancy = &g_array_index(vacancies, Vacancy, i);
        if (vacancy->spot < 0) continue;
        RfHit hit = {vacancy->exposure, vacancy->spot};
        g_array_append_val(((RfChain *)g_ptr_array_index(chains, vacancy->chain))->hits, hit);
        scene->is_claimed[vacancy->spot] = is_changed[vacancy->chain] = true;
    }
    for (unsigned c = 0; c < chains->len; c++)
        if (is_changed[c]) g_array_sort(((RfChain *)g_ptr_array_index(chains, c))->hits, compare_hits);
}

void rf_fill_gaps(RfLinkScene *scene, GPtrArray *chains)
{
    g_autoptr(GArray) vacancies = g_array_new(false, false, sizeof(Vacancy));
    g_autoptr(GArray) edges = g_array_new(false, false, sizeof(RfAssignmentEdge));
    collect_vacancies(scene, chains, vacancies);
    g_array_sort(vacancies, compare_vacancies);
    collect_offers(scene, vacancies, -log(rf_fill_unclaimed_px2(scene)), edges);
    g_autofree int *spot_of_vacancy = g_new(int, vacancies->len + 1);
    /* exposures don't share spots: one assignment solves each of them by itself */
    rf_assignment_solve((const RfAssignmentEdge *)(const void *)edges->data, edges->len, (int)vacancies->len,
                        (int)scene->sightings->spots->len, 0, spot_of_vacancy);
    for (unsigned v = 0; v < vacancies->len; v++)
        g_array_index(vacancies, Vacancy, v).spot = spot_of_vacancy[v];
    settle_doubts(scene, vacancies);
    take_in(scene, chains, vacancies);
}

/* Where a chain is in an exposure, seen or not. */
typedef struct {
    unsigned exposure, chain;
    RfSight place;
    bool is_seen, is_shared;
    unsigned hit;
} Presence;

static GArray *collect_presences(const RfLinkScene *scene, const GPtrArray *chains)
{
    GArray *presences = g_array_new(false, false, sizeof(Presence));
    for (unsigned c = 0; c < chains->len; c++) {
        const RfChain *chain = g_ptr_array_index(chains, c);
        unsigned first = rf_chain_first(chain), last = rf_chain_last(chain);
        g_autofree RfSight *smooth = rf_chain_smooth(scene, chain);
        for (unsigned e = first, k = 0; e <= last; e++) {
            bool is_seen = g_array_index(chain->hits, RfHit, k).exposure == e;
            Presence presence = {e, c, smooth[e - first], is_seen, false, k};
            k += is_seen;
            if (scene->is_usable[e]) g_array_append_val(presences, presence);
        }
    }
    return presences;
}

static int compare_presences(const void *a, const void *b)
{
    const Presence *x = a, *y = b;
    if (x->exposure != y->exposure) return x->exposure < y->exposure ? -1 : 1;
    return x->chain < y->chain ? -1 : x->chain > y->chain;
}

/* Presences of one exposure: those seen, beside any that is not. */
static void mark_shared_in(const RfLinkScene *scene, Presence *presences, unsigned n)
{
    for (unsigned i = 0; i < n; i++)
        for (unsigned j = 0; !presences[i].is_seen && j < n; j++)
            if (presences[j].is_seen && may_merge(scene, &presences[i].place, &presences[j].place))
                presences[j].is_shared = true;
}

static void mark_shared(const RfLinkScene *scene, GArray *presences)
{
    Presence *all = (Presence *)(void *)presences->data;
    for (unsigned i = 0, j; i < presences->len; i = j) {
        for (j = i + 1; j < presences->len && all[j].exposure == all[i].exposure;) j++;
        mark_shared_in(scene, &all[i], j - i);
    }
}

static bool is_inner(const RfChain *chain, unsigned hit)
{
    return hit > 0 && hit + 1 < chain->hits->len;
}

void rf_fill_release_shared(RfLinkScene *scene, GPtrArray *chains)
{
    g_autoptr(GArray) presences = collect_presences(scene, chains);
    g_array_sort(presences, compare_presences);
    mark_shared(scene, presences);
    for (unsigned i = presences->len; i-- > 0;) { /* from the end, so that the indices before stay right */
        const Presence *presence = &g_array_index(presences, Presence, i);
        RfChain *chain = g_ptr_array_index(chains, presence->chain);
        if (!presence->is_shared || !is_inner(chain, presence->hit)) continue;
        scene->is_claimed[g_array_index(chain->hits, RfHit, presence->hit).spot] = false;
        g_array_remove_index(chain->hits, presence->hit);
    }
}

/* Likeliest unclaimed spot of an exposure for a droplet expected there; -1 if none is likelier than chance. */
static int best_unclaimed(const RfLinkScene *scene, unsigned e, const RfMotion *m, double limit,
                          double *log_odds)
{
    const RfExposure *exposure = rf_link_scene_exposure(scene, e);
    double reach_px[2], best = limit;
    rf_motion_reach(m, &scene->model, limit, reach_px);
    int found = -1;
    unsigned end = exposure->first_spot + exposure->spots;
    for (unsigned k = rf_link_scene_first_from(scene, e, m->axis[1].position_px - reach_px[1]); k < end;
         k++) {
        int spot = scene->by_height[k];
        const RfSight *sight = &scene->sights[spot];
        if (sight->at_px[1] > m->axis[1].position_px + reach_px[1]) break;
        if (scene->is_claimed[spot]) continue;
        double surprise = rf_motion_surprise(m, &scene->model, sight, NULL);
        if (surprise < best) {
            best = surprise;
            found = spot;
        }
    }
    *log_odds = limit - best;
    return found;
}

/* Hits beyond one end, as far as their odds against chance are best. */
static GArray *search_beyond(const RfLinkScene *scene, const RfChain *chain, int direction, double limit)
{
    GArray *found = g_array_new(false, false, sizeof(RfHit));
    RfMotion motion = rf_chain_end_state(scene, chain, direction < 0, 1);
    int e = (int)(direction < 0 ? rf_chain_first(chain) : rf_chain_last(chain));
    int n = (int)scene->sightings->exposures->len;
    double odds = 0, best_odds = 0;
    unsigned best = 0;
    for (int i = e + direction; i >= 0 && i < n; i += direction) {
        double from_s = rf_link_scene_exposure(scene, (unsigned)(i - direction))->time_s;
        rf_chain_carry(scene, &scene->model, &motion, from_s,
                       rf_link_scene_exposure(scene, (unsigned)i)->time_s);
        if (fabs(motion.unseen_s) > unseen_s) break;
        if (!scene->is_usable[i]) continue;
        double gain;
        RfHit hit = {(unsigned)i, best_unclaimed(scene, (unsigned)i, &motion, limit, &gain)};
        odds += hit.spot >= 0 ? gain : -missed_log_odds;
        if (hit.spot < 0) continue;
        g_array_append_val(found, hit);
        rf_motion_update(&motion, &scene->sights[hit.spot]);
        if (odds > best_odds + accepted_log_odds / 2) {
            best_odds = odds;
            best = found->len;
        }
    }
    g_array_set_size(found, best_odds > accepted_log_odds ? best : 0);
    return found;
}

void rf_fill_ends(RfLinkScene *scene, GPtrArray *chains)
{
    double limit = -log(rf_fill_unclaimed_px2(scene));
    for (unsigned c = 0; c < chains->len; c++) {
        RfChain *chain = g_ptr_array_index(chains, c);
        for (int direction = -1; direction <= 1; direction += 2) {
            if (direction < 0 ? chain->is_cut_before : chain->is_cut_after) continue;
            g_autoptr(GArray) found = search_beyond(scene, chain, direction, limit);
            for (unsigned i = 0; i < found->len; i++)
                scene->is_claimed[g_array_index(found, RfHit, i).spot] = true;
            if (found->len == 0) continue;
            g_array_append_vals(chain->hits, found->data, found->len);
            g_array_sort(chain->hits, compare_hits); /* the other end is looked for among them */
        }
    }
}
