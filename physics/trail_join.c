#include "physics/trail_join.h"

#include <math.h>
#include <string.h>

static const double GAP_MAX_S = 0.2;
/* How far a droplet may get: wander of a small one (D = 5e-11 m^2/s), speed of a fast one. */
static const double WANDER_M2_S = 1e-10, SPEED_M_S = 4e-4;

enum { NONE = -1 };

/* Distance from an end to a start in standard deviations; negative: out of reach. */
static double apart(const RfTrail *before, const RfTrail *after)
{
    const RfSample *a = &before->samples[before->n - 1], *b = &after->samples[0];
    double gap_s = b->time_s - a->time_s;
    if (!(gap_s > 0) || gap_s > GAP_MAX_S) return -1;
    double wander2 = WANDER_M2_S * gap_s, run_m = SPEED_M_S * gap_s;
    double across2 = wander2 + a->u_drift_m * a->u_drift_m + b->u_drift_m * b->u_drift_m;
    double fall2 = wander2 + run_m * run_m / 3 + a->u_fall_m * a->u_fall_m + b->u_fall_m * b->u_fall_m;
    double x = b->drift_m - a->drift_m, y = b->fall_m - a->fall_m,
           distance2 = x * x / across2 + y * y / fall2;
    return distance2 > 16 ? -1 : sqrt(distance2);
}

static void nearest(const RfTrail *trails, size_t n, int *after, int *before)
{
    g_autofree double *to_next = g_new(double, n), *to_last = g_new(double, n);
    for (size_t i = 0; i < n; i++) {
        after[i] = before[i] = NONE;
        to_next[i] = to_last[i] = HUGE_VAL;
    }
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < n; j++) {
            if (i == j || trails[i].n == 0 || trails[j].n == 0) continue;
            double distance = apart(&trails[i], &trails[j]);
            if (distance < 0) continue;
            if (distance < to_next[i]) {
                to_next[i] = distance;
                after[i] = (int)j;
            }
            if (distance < to_last[j]) {
                to_last[j] = distance;
                before[j] = (int)i;
            }
        }
}

static RfTrail lay_out(const RfTrail *trails, const int *after, const int *before, size_t first)
{
    size_t total = 0;
    int last = (int)first;
    for (int i = last; i != NONE; i = after[i] != NONE && before[after[i]] == i ? after[i] : NONE)
        total += trails[i].n;
    RfSample *samples = g_new(RfSample, MAX(total, 1));
    RfTrail joined = {trails[first].droplet, total, samples};
    for (int i = last; i != NONE; i = after[i] != NONE && before[after[i]] == i ? after[i] : NONE) {
        if (trails[i].n > 0) memcpy(samples, trails[i].samples, trails[i].n * sizeof *samples);
        samples += trails[i].n;
    }
    return joined;
}

RfJoinedTrails *rf_trail_join(const RfTrail *trails, size_t n)
{
    RfJoinedTrails *joined = g_new0(RfJoinedTrails, 1);
    g_autofree int *after = g_new(int, n + 1), *before = g_new(int, n + 1);
    joined->trails = g_new0(RfTrail, n + 1);
    nearest(trails, n, after, before);
    for (size_t i = 0; i < n; i++) {
        bool is_continued = before[i] != NONE && after[before[i]] == (int)i;
        if (!is_continued) joined->trails[joined->n++] = lay_out(trails, after, before, i);
    }
    return joined;
}

void rf_trail_join_free(RfJoinedTrails *joined)
{
    if (!joined) return;
    for (size_t i = 0; i < joined->n; i++) g_free((void *)joined->trails[i].samples);
    g_free(joined->trails);
    g_free(joined);
}
