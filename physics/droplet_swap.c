#include "physics/droplet_swap.h"

#include <math.h>

/* Droplets of one spray differ so much, in ln(radius). */
static const double RADII_SPREAD = 0.3;
/* Of changes in a path that look like a step of charge, one in a hundred is another droplet. */
static const double LOG_PRIOR_ODDS = -4.6;

enum { OFF_PLACES = 5 }; /* tried within an off state, where the path doesn't tell */

typedef struct {
    RfDropletFit before, after;
} Sides;

static size_t first_sample_from(const RfTrail *trail, double time_s)
{
    size_t i = 0;
    while (i < trail->n && trail->samples[i].time_s < time_s) i++;
    return i;
}

static bool fit_sides(const RfTrail *trail, const RfDropletModel *model, size_t step, double time_s,
                      Sides *sides)
{
    size_t cut = first_sample_from(trail, time_s);
    const RfTrail left = {trail->droplet, cut, trail->samples},
                  right = {trail->droplet, trail->n - cut, trail->samples + cut};
    RfDropletModel until = *model, since = *model;
    until.steps = step;
    since.step_s = model->step_s + step + 1;
    since.steps = model->steps - step - 1;
    rf_droplet_fit(&left, &until, &sides->before);
    rf_droplet_fit(&right, &since, &sides->after);
    return sides->before.state == RF_FIT_DONE && sides->after.state == RF_FIT_DONE;
}

/* Log of how much likelier a difference is when its spread has the radii's own besides its sigma's. */
static double log_odds_of_two(const RfValue *difference)
{
    double own = difference->sigma * difference->sigma, more = 2 * RADII_SPREAD * RADII_SPREAD;
    double z2 = difference->value * difference->value / own;
    return 0.5 * z2 * more / (own + more) - 0.5 * log1p(more / own);
}

static RfValue log_radius_change(const Sides *sides)
{
    const RfValue *a = &sides->before.radius_m, *b = &sides->after.radius_m;
    return (RfValue){log(b->value / a->value), hypot(a->sigma / a->value, b->sigma / b->value)};
}

bool rf_droplet_swap_weigh(const RfTrail *trail, const RfDropletModel *model, size_t step, double from_s,
                           double to_s, RfDropletSwap *swap)
{
    double best = -HUGE_VAL;
    int places = to_s > from_s ? OFF_PLACES : 1;
    for (int i = 0; i < places; i++) {
        Sides sides;
        double time_s = places > 1 ? from_s + (to_s - from_s) * i / (places - 1) : from_s;
        if (!fit_sides(trail, model, step, time_s, &sides)) continue;
        double likelihood = sides.before.log_likelihood + sides.after.log_likelihood;
        if (!(likelihood > best)) continue;
        best = likelihood;
        swap->time_s = time_s;
        swap->log_radius_change = log_radius_change(&sides);
        swap->log_odds = LOG_PRIOR_ODDS + log_odds_of_two(&swap->log_radius_change);
    }
    return isfinite(best);
}

static double distance_m(const RfSample *a, const RfSample *b)
{
    return hypot(a->fall_m - b->fall_m, a->drift_m - b->drift_m);
}

RfSwapKind rf_droplet_swap_kind(const RfTrail *trails, size_t n, size_t droplet, const RfDropletSwap *swap,
                                size_t *partner)
{
    static const double beside_s = 0.5, beside_m = 30e-6; /* images merge before the droplets do */
    const RfTrail *own = &trails[droplet];
    if (!(swap->log_radius_change.value > 0)) return RF_SWAP_TAKEN_OVER;
    for (size_t i = 0; i < n; i++) {
        if (i == droplet || trails[i].n == 0) continue;
        const RfSample *last = &trails[i].samples[trails[i].n - 1];
        size_t at = first_sample_from(own, last->time_s);
        if (at == own->n || fabs(last->time_s - swap->time_s) > beside_s) continue;
        if (distance_m(last, &own->samples[at]) > beside_m) continue;
        *partner = i;
        return RF_SWAP_MERGED;
    }
    return RF_SWAP_TAKEN_OVER;
}
