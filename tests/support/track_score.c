#include "tests/support/track_score.h"

#include <math.h>
#include <stdbool.h>

#include "tracker/assignment.h"

/* Tracks as tables over frames: NULL where a track doesn't exist. */
static const RfScorePoint **lay_out(const GPtrArray *tracks, int frames)
{
    const RfScorePoint **table = g_new0(const RfScorePoint *, (gsize)frames * tracks->len + 1);
    for (unsigned t = 0; t < tracks->len; t++) {
        const GArray *track = g_ptr_array_index(tracks, t);
        for (unsigned i = 0; i < track->len; i++) {
            const RfScorePoint *point = &g_array_index(track, RfScorePoint, i);
            table[(gsize)t * (gsize)frames + (gsize)point->frame] = point;
        }
    }
    return table;
}

static double apart_px(const RfScorePoint *a, const RfScorePoint *b)
{
    return hypot(a->x_px - b->x_px, a->y_px - b->y_px);
}

static double distance_px(const RfScorePoint **a, const RfScorePoint **b, int frames, double gate_px)
{
    double sum_px = 0;
    for (int f = 0; f < frames; f++)
        if (a[f] || b[f]) sum_px += a[f] && b[f] ? fmin(gate_px, apart_px(a[f], b[f])) : gate_px;
    return sum_px;
}

/* Pairs tracks so that the summed distance is least, a true track without partner counting its length times the gate. */
static int *pair(const RfScorePoint **truth, const RfScorePoint **found, unsigned n_truth, unsigned n_found,
                 int frames, const GPtrArray *tracks, double gate_px, double *distance)
{
    g_autoptr(GArray) edges = g_array_new(false, false, sizeof(RfAssignmentEdge));
    *distance = 0;
    for (unsigned i = 0; i < n_truth; i++) {
        double alone_px = gate_px * ((const GArray *)g_ptr_array_index(tracks, i))->len;
        *distance += alone_px;
        for (unsigned j = 0; j < n_found; j++) {
            double d = distance_px(truth + (gsize)i * (gsize)frames, found + (gsize)j * (gsize)frames, frames,
                                   gate_px);
            RfAssignmentEdge edge = {(int)i, (int)j, d - alone_px};
            if (edge.cost < 0) g_array_append_val(edges, edge);
        }
    }
    int *partner = g_new(int, n_truth + 1);
    *distance += rf_assignment_solve((const RfAssignmentEdge *)(const void *)edges->data, edges->len,
                                     (int)n_truth, (int)n_found, 0, partner);
    return partner;
}

static int count_switches(const RfScorePoint **truth, const RfScorePoint **found, unsigned n_found,
                          int frames, double gate_px)
{
    int switches = 0, last = -1;
    for (int f = 0; f < frames; f++) {
        int nearest = -1;
        double best_px = gate_px;
        for (unsigned j = 0; truth[f] && j < n_found; j++) {
            const RfScorePoint *point = found[(gsize)j * (gsize)frames + (gsize)f];
            if (point && apart_px(truth[f], point) < best_px) {
                best_px = apart_px(truth[f], point);
                nearest = (int)j;
            }
        }
        switches += nearest >= 0 && last >= 0 && nearest != last;
        last = nearest >= 0 ? nearest : last;
    }
    return switches;
}

static unsigned count_points(const GPtrArray *tracks)
{
    unsigned n = 0;
    for (unsigned i = 0; i < tracks->len; i++) n += ((const GArray *)g_ptr_array_index(tracks, i))->len;
    return n;
}

RfTrackScore rf_track_score(const GPtrArray *truth, const GPtrArray *found, int frames, double gate_px)
{
    g_autofree const RfScorePoint **a = lay_out(truth, frames), **b = lay_out(found, frames);
    double distance, alone = gate_px * count_points(truth), squares = 0;
    g_autofree int *partner = pair(a, b, truth->len, found->len, frames, truth, gate_px, &distance);
    unsigned hits = 0, paired = 0, paired_points = 0;
    RfTrackScore score = {0};
    for (unsigned i = 0; i < truth->len; i++) {
        const RfScorePoint **row = a + (gsize)i * (gsize)frames;
        score.identity_switches += count_switches(row, b, found->len, frames, gate_px);
        if (partner[i] < 0) continue;
        paired++;
        paired_points += ((const GArray *)g_ptr_array_index(found, partner[i]))->len;
        for (int f = 0; f < frames; f++) {
            const RfScorePoint *there = b[(gsize)partner[i] * (gsize)frames + (gsize)f];
            if (!row[f] || !there || apart_px(row[f], there) >= gate_px) continue;
            hits++;
            squares += pow(apart_px(row[f], there), 2);
        }
    }
    double spurious = gate_px * (count_points(found) - paired_points);
    score.alpha = 1 - distance / alone;
    score.beta = (alone - distance) / (alone + spurious);
    score.jsc = hits / (double)(count_points(truth) + count_points(found) - hits);
    score.jsc_theta = paired / (double)(truth->len + found->len - paired);
    score.rmse_px = hits ? sqrt(squares / hits) : 0;
    return score;
}
