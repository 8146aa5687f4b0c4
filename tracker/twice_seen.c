#include "tracker/twice_seen.h"

#include <math.h>

enum { most_exposures = 2, least_left = 3 };

static const RfHit *hit_at(const RfChain *chain, unsigned i)
{
    return &g_array_index(chain->hits, RfHit, i);
}

/* Hits of the chain up to an exposure, itself included. */
static unsigned hits_until(const RfChain *chain, unsigned exposure)
{
    unsigned n = 0;
    while (n < chain->hits->len && hit_at(chain, n)->exposure <= exposure) n++;
    return n;
}

static unsigned hits_from(const RfChain *chain, unsigned exposure)
{
    unsigned n = 0;
    while (n < chain->hits->len && hit_at(chain, chain->hits->len - 1 - n)->exposure >= exposure) n++;
    return n;
}

static bool are_near(const RfLinkScene *scene, const RfHit *a, const RfHit *b)
{
    const RfSight *p = &scene->sights[a->spot], *q = &scene->sights[b->spot];
    return hypot(p->at_px[0] - q->at_px[0], p->at_px[1] - q->at_px[1]) < 2 * scene->merge_px;
}

/* `a` ends as `b` begins, and while there are both, they lie no further apart than a droplet may jump. */
static bool may_be_one(const RfLinkScene *scene, const RfChain *a, const RfChain *b)
{
    if (a->is_cut_after || b->is_cut_before) return false;
    unsigned ending = hits_from(a, rf_chain_first(b)), beginning = hits_until(b, rf_chain_last(a));
    return rf_chain_first(a) < rf_chain_first(b) && ending > 0 && ending <= most_exposures &&
           beginning <= most_exposures && a->hits->len >= ending + least_left &&
           b->hits->len >= beginning + least_left &&
           are_near(scene, hit_at(a, a->hits->len - ending), hit_at(b, 0)) &&
           are_near(scene, hit_at(a, a->hits->len - 1), hit_at(b, beginning - 1));
}

static void release(RfLinkScene *scene, RfChain *chain, unsigned first, unsigned n)
{
    for (unsigned i = first; i < first + n; i++) scene->is_claimed[hit_at(chain, i)->spot] = false;
    g_array_remove_range(chain->hits, first, n);
}

void rf_twice_seen_release(RfLinkScene *scene, const GPtrArray *chains)
{
    for (unsigned i = 0; i < chains->len; i++) {
        RfChain *a = g_ptr_array_index(chains, i);
        for (unsigned j = i + 1; j < chains->len; j++) {
            RfChain *b = g_ptr_array_index(chains, j);
            if (rf_chain_first(b) > rf_chain_last(a)) break; /* in order of first exposure */
            if (!may_be_one(scene, a, b)) continue;
            unsigned ending = hits_from(a, rf_chain_first(b)), beginning = hits_until(b, rf_chain_last(a));
            release(scene, a, a->hits->len - ending, ending);
            release(scene, b, 0, beginning);
            break;
        }
    }
}
