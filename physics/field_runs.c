#include "physics/field_runs.h"

#include <math.h>

#include "physics/droplet_path.h"

/* Shortest bin; switches closer than two bins can't be told apart here. */
static const double BIN_S = 0.1;
/* Log-likelihood that a cut must gain: so much for itself, so much for each droplet's new speed (chance gains half a unit
 * per droplet on average). Rather low: a cut too many joins two runs of one label, a cut missed is a switch missed. */
static const double CUT_COST = 6.5, SPEED_COST = 1.2;

typedef struct {
    size_t first, end; /* bins covered whole */
    double *place_m;   /* at the edges of its bins, end - first + 1 */
    double rate;       /* variance of a displacement per second, twice an effective D */
} BinnedTrail;

typedef struct {
    size_t bins, trails;
    double start_s, bin_s;
    BinnedTrail *trail;
} Binned;

static void recording_span(const RfTrail *trails, size_t n, double *start_s, double *end_s)
{
    *start_s = HUGE_VAL;
    *end_s = -HUGE_VAL;
    for (size_t j = 0; j < n; j++) {
        if (trails[j].n == 0) continue;
        *start_s = fmin(*start_s, trails[j].samples[0].time_s);
        *end_s = fmax(*end_s, trails[j].samples[trails[j].n - 1].time_s);
    }
    if (*start_s > *end_s) *start_s = *end_s = 0;
}

static double place_at(const RfTrail *trail, size_t *cursor, double time_s)
{
    const RfSample *s = trail->samples;
    while (*cursor + 2 < trail->n && s[*cursor + 1].time_s < time_s) (*cursor)++;
    const RfSample *a = &s[*cursor], *b = &s[*cursor + 1];
    double part = (time_s - a->time_s) / (b->time_s - a->time_s);
    return a->fall_m + part * (b->fall_m - a->fall_m);
}

static void bin_trail(const RfTrail *trail, const Binned *binned, BinnedTrail *into)
{
    *into = (BinnedTrail){0};
    if (trail->n < 3) return;
    double from = (trail->samples[0].time_s - binned->start_s) / binned->bin_s;
    double to = (trail->samples[trail->n - 1].time_s - binned->start_s) / binned->bin_s;
    into->first = (size_t)ceil(from - 1e-9);
    size_t end = (size_t)floor(to + 1e-9);
    into->end = MIN(end, binned->bins);
    if (into->end <= into->first) {
        into->end = into->first;
        return;
    }
    into->place_m = g_new(double, into->end - into->first + 1);
    size_t cursor = 0;
    for (size_t b = into->first; b <= into->end; b++)
        into->place_m[b - into->first] =
            place_at(trail, &cursor, binned->start_s + (double)b * binned->bin_s);
}

/* D from the scatter across gravity, where no field acts, drawn towards the mean of all where there is little of it. */
static void estimate_diffusion(const RfTrail *trails, size_t n, double *own, double *diffusion, double *noise)
{
    static const double own_weight_s = 2; /* a trail of 2 s counts as much as the common value */
    const RfDropletModel nothing = {0};
    double sum = 0, weight = 0;
    for (size_t j = 0; j < n; j++) {
        own[j] = diffusion[j] = noise[j] = 0;
        if (trails[j].n < 3) continue;
        g_autoptr(RfDropletPath) path = rf_droplet_path_new(&trails[j], &nothing);
        rf_droplet_path_scatter(path, &diffusion[j], &noise[j]);
        own[j] = diffusion[j];
        double span = path->times_s[path->n - 1] - path->times_s[0];
        sum += span * diffusion[j];
        weight += span;
    }
    double common = weight > 0 ? sum / weight : 0;
    if (!(common > 0))
        common = 2e-11; /* a droplet of 0.65 um in air: the order of magnitude is all that's needed */
    for (size_t j = 0; j < n; j++) {
        double span =
            trails[j].n < 3 ? 0 : trails[j].samples[trails[j].n - 1].time_s - trails[j].samples[0].time_s;
        diffusion[j] = (span * diffusion[j] + own_weight_s * common) / (span + own_weight_s);
        diffusion[j] = fmax(diffusion[j], common / 5);
        noise[j] = fmax(noise[j], 0);
    }
}

static double typical_step(const RfTrail *trails, size_t n)
{
    double span = 0;
    size_t steps = 0;
    for (size_t j = 0; j < n; j++) {
        if (trails[j].n < 2) continue;
        span += trails[j].samples[trails[j].n - 1].time_s - trails[j].samples[0].time_s;
        steps += trails[j].n - 1;
    }
    return steps > 0 ? span / (double)steps : 1;
}

static void bin_all(const RfTrail *trails, size_t n, const double *diffusion, const double *noise,
                    Binned *binned)
{
    double end_s;
    recording_span(trails, n, &binned->start_s, &end_s);
    double length = end_s - binned->start_s, wanted = fmax(BIN_S, 2 * typical_step(trails, n));
    binned->bins = MAX((size_t)floor(length / wanted), 1);
    binned->bin_s = length > 0 ? length / (double)binned->bins : wanted;
    binned->trails = n;
    binned->trail = g_new(BinnedTrail, n);
    for (size_t j = 0; j < n; j++) {
        bin_trail(&trails[j], binned, &binned->trail[j]);
        binned->trail[j].rate =
            2 * diffusion[j] + 2 * noise[j] / 0.5; /* localisation, over a run of half a second */
    }
}

/* Trails that runs ending at the present bin may touch, in the order of all trails. */
typedef struct {
    size_t *by_first; /* trails with bins, in the order in which they come into view */
    size_t n_trails, next;
    size_t *open;
    size_t n_open;
} InView;

static int compare_firsts(const void *a, const void *b, void *data)
{
    const BinnedTrail *trail = data;
    size_t i = *(const size_t *)a, j = *(const size_t *)b;
    if (trail[i].first != trail[j].first) return trail[i].first < trail[j].first ? -1 : 1;
    return (i > j) - (i < j);
}

static void in_view_init(InView *view, const Binned *binned)
{
    *view =
        (InView){.by_first = g_new(size_t, binned->trails + 1), .open = g_new(size_t, binned->trails + 1)};
    for (size_t j = 0; j < binned->trails; j++)
        if (binned->trail[j].end > binned->trail[j].first) view->by_first[view->n_trails++] = j;
    g_qsort_with_data(view->by_first, (int)view->n_trails, sizeof(size_t), compare_firsts, binned->trail);
}

static void in_view_clear(InView *view)
{
    g_free(view->by_first);
    g_free(view->open);
}

/* Keeps those that end after bin `from` and begin before bin `to`; both never go back. */
static void in_view_move(InView *view, const Binned *binned, size_t from, size_t to)
{
    size_t kept = 0;
    for (size_t i = 0; i < view->n_open; i++)
        if (binned->trail[view->open[i]].end > from) view->open[kept++] = view->open[i];
    view->n_open = kept;
    for (; view->next < view->n_trails; view->next++) {
        size_t j = view->by_first[view->next], at = view->n_open;
        if (binned->trail[j].first >= to) break;
        if (binned->trail[j].end <= from) continue;
        for (; at > 0 && view->open[at - 1] > j; at--) view->open[at] = view->open[at - 1];
        view->open[at] = j;
        view->n_open++;
    }
}

/* What a run from bin a to bin b explains: half the squared displacement over its variance, less the cost. */
static double run_gain(const Binned *binned, const InView *view, size_t a, size_t b)
{
    double gain = -CUT_COST;
    for (size_t i = 0; i < view->n_open; i++) {
        const BinnedTrail *t = &binned->trail[view->open[i]];
        size_t from = MAX(a, t->first), to = MIN(b, t->end);
        if (from >= to) continue;
        double moved = t->place_m[to - t->first] - t->place_m[from - t->first];
        gain += moved * moved / (2 * t->rate * (double)(to - from) * binned->bin_s) - SPEED_COST;
    }
    return gain;
}

/* The most that a cut at a bin can cost: itself and a speed more for each trail that goes on across it. */
static double cut_cost(const Binned *binned, const InView *view, size_t b)
{
    size_t across = 0;
    for (size_t i = 0; i < view->n_open; i++) {
        const BinnedTrail *t = &binned->trail[view->open[i]];
        across += t->first < b && b < t->end;
    }
    return CUT_COST + SPEED_COST * (double)across;
}

/* cut[b]: where the run that ends at bin b begins, in the best partition of what lies before b. */
static void partition(const Binned *binned, size_t *cut)
{
    g_autofree double *best = g_new(double, binned->bins + 1), *with = g_new(double, binned->bins + 1);
    g_autofree size_t *alive = g_new(size_t, binned->bins + 1);
    InView view;
    in_view_init(&view, binned);
    size_t n_alive = 0;
    best[0] = 0;
    for (size_t b = 1; b <= binned->bins; b++) {
        alive[n_alive++] = b - 1;
        best[b] = -HUGE_VAL;
        in_view_move(&view, binned, alive[0], b);
        for (size_t i = 0; i < n_alive; i++) {
            with[i] = best[alive[i]] + run_gain(binned, &view, alive[i], b);
            if (with[i] <= best[b]) continue;
            best[b] = with[i];
            cut[b] = alive[i];
        }
        size_t kept = 0; /* a start that lags by more than a new cut could cost never leads again */
        double slack = cut_cost(binned, &view, b) + 1e-6; /* sums of costs are rounded */
        for (size_t i = 0; i < n_alive; i++)
            if (with[i] + slack >= best[b]) alive[kept++] = alive[i];
        n_alive = kept;
    }
    in_view_clear(&view);
}

/* How many trails go on across each bin, and how many begin or end there; both bins + 1. */
static void count_trails(const Binned *binned, int *spanning, int *beside)
{
    for (size_t j = 0; j < binned->trails; j++) {
        const BinnedTrail *t = &binned->trail[j];
        if (t->end <= t->first) continue;
        spanning[t->first + 1]++;
        spanning[t->end]--;
        beside[t->first]++;
        beside[t->end]++;
    }
    for (size_t b = 1; b <= binned->bins; b++) spanning[b] += spanning[b - 1];
}

/* Bins at which trails begin or end with one other in view at most; of several in a row the middle one. */
static void mark_blind(const Binned *binned, bool *blind)
{
    g_autofree int *spanning = g_new0(int, binned->bins + 2), *beside = g_new0(int, binned->bins + 2);
    size_t first = 0;
    count_trails(binned, spanning, beside);
    for (size_t b = 1; b <= binned->bins; b++) {
        bool is_blind = b < binned->bins && (spanning[b] == 0 || (spanning[b] == 1 && beside[b] > 0));
        if (is_blind && first == 0) first = b;
        if (is_blind || first == 0) continue;
        blind[(first + b - 1) / 2] = true;
        first = 0;
    }
}

static const RfRunSpeed UNWATCHED = {0};

const RfRunSpeed *rf_field_runs_speed(const RfFieldRuns *runs, size_t droplet, size_t run)
{
    const RfRunSpan *span = &runs->span[droplet];
    return run >= span->first && run < span->end ? &runs->speed[span->at + run - span->first] : &UNWATCHED;
}

/* Lays out the speeds of a span behind those of the droplet before. */
static void place_span(RfFieldRuns *runs, size_t droplet, size_t first, size_t end)
{
    const RfRunSpan *before = droplet > 0 ? &runs->span[droplet - 1] : NULL;
    runs->span[droplet] = (RfRunSpan){first, end, before ? before->at + before->end - before->first : 0};
}

static void alloc_speeds(RfFieldRuns *runs)
{
    const RfRunSpan *last = runs->droplets > 0 ? &runs->span[runs->droplets - 1] : NULL;
    runs->speed = g_new0(RfRunSpeed, last ? last->at + last->end - last->first : 0);
}

/* The first edge at or beyond a bin. */
static size_t edge_from(const size_t *edges, size_t n, size_t bin)
{
    size_t low = 0, high = n;
    while (low < high) {
        size_t middle = low + (high - low) / 2;
        if (edges[middle] < bin)
            low = middle + 1;
        else
            high = middle;
    }
    return low;
}

static void place_spans(const Binned *binned, const size_t *edges, RfFieldRuns *runs)
{
    for (size_t j = 0; j < runs->droplets; j++) {
        const BinnedTrail *t = &binned->trail[j];
        bool is_watched = t->end > t->first;
        size_t first = is_watched ? edge_from(edges, runs->runs, t->first + 1) - 1 : 0;
        place_span(runs, j, first, is_watched ? edge_from(edges, runs->runs, t->end) : 0);
    }
    alloc_speeds(runs);
}

static void fill_speeds(const Binned *binned, const size_t *edges, RfFieldRuns *runs)
{
    place_spans(binned, edges, runs);
    for (size_t j = 0; j < runs->droplets; j++) {
        const BinnedTrail *t = &binned->trail[j];
        RfRunSpeed *speed = runs->speed + runs->span[j].at;
        for (size_t r = runs->span[j].first; r < runs->span[j].end; r++, speed++) {
            size_t from = MAX(edges[r], t->first), to = MIN(edges[r + 1], t->end);
            speed->time_s = (double)(to - from) * binned->bin_s;
            speed->speed_m_s = (t->place_m[to - t->first] - t->place_m[from - t->first]) / speed->time_s;
            speed->variance_m2_s2 = t->rate / speed->time_s;
        }
    }
}

static RfFieldRuns *alloc_runs(size_t n_runs, size_t droplets, double bin_s)
{
    RfFieldRuns *runs = g_new0(RfFieldRuns, 1);
    *runs = (RfFieldRuns){.runs = n_runs, .droplets = droplets, .bin_s = bin_s};
    runs->edge_s = g_new(double, n_runs + 1);
    runs->is_blind = g_new0(bool, n_runs + 1);
    runs->span = g_new0(RfRunSpan, droplets);
    return runs;
}

static RfFieldRuns *collect(const Binned *binned, const size_t *cut)
{
    g_autofree bool *blind = g_new0(bool, binned->bins + 1), *is_edge = g_new0(bool, binned->bins + 1);
    size_t n = 0, e = 0;
    mark_blind(binned, blind);
    for (size_t b = binned->bins; b > 0; b = cut[b]) is_edge[b] = true;
    is_edge[0] = true;
    for (size_t b = 1; b <= binned->bins; b++) n += is_edge[b] = is_edge[b] || blind[b];
    RfFieldRuns *runs = alloc_runs(n, binned->trails, binned->bin_s);
    g_autofree size_t *edges = g_new(size_t, n + 1);
    for (size_t b = 0; b <= binned->bins; b++) {
        if (!is_edge[b]) continue;
        runs->edge_s[e] = binned->start_s + (double)b * binned->bin_s;
        runs->is_blind[e] = blind[b];
        edges[e++] = b;
    }
    fill_speeds(binned, edges, runs);
    return runs;
}

static void add_speed(RfRunSpeed *to, const RfRunSpeed *more)
{
    if (!(more->time_s > 0)) return;
    double time_s = to->time_s + more->time_s, rate = more->variance_m2_s2 * more->time_s;
    to->speed_m_s = (to->speed_m_s * to->time_s + more->speed_m_s * more->time_s) / time_s;
    to->variance_m2_s2 = rate / time_s;
    to->time_s = time_s;
}

static void merge_speeds(const RfFieldRuns *runs, const size_t *part, RfFieldRuns *merged)
{
    for (size_t j = 0; j < runs->droplets; j++) {
        const RfRunSpan *span = &runs->span[j];
        bool is_watched = span->end > span->first;
        place_span(merged, j, is_watched ? part[span->first] : 0, is_watched ? part[span->end - 1] + 1 : 0);
    }
    alloc_speeds(merged);
    for (size_t j = 0; j < runs->droplets; j++) {
        RfRunSpeed *to = merged->speed + merged->span[j].at;
        for (size_t r = runs->span[j].first; r < runs->span[j].end; r++)
            add_speed(&to[part[r] - merged->span[j].first], rf_field_runs_speed(runs, j, r));
    }
}

RfFieldRuns *rf_field_runs_merge(const RfFieldRuns *runs, const unsigned *label, size_t *part)
{
    size_t n = 0;
    for (size_t r = 0; r < runs->runs; r++) {
        if (r > 0 && (label[r] != label[r - 1] || runs->is_blind[r])) n++;
        part[r] = n;
    }
    RfFieldRuns *merged = alloc_runs(n + 1, runs->droplets, runs->bin_s);
    for (size_t r = 0; r < runs->runs; r++) {
        if (r == 0 || part[r] != part[r - 1]) {
            merged->edge_s[part[r]] = runs->edge_s[r];
            merged->is_blind[part[r]] = runs->is_blind[r];
        }
    }
    merge_speeds(runs, part, merged);
    merged->edge_s[n + 1] = runs->edge_s[runs->runs];
    merged->diffusion_m2_s = g_memdup2(runs->diffusion_m2_s, runs->droplets * sizeof(double));
    merged->own_diffusion_m2_s = g_memdup2(runs->own_diffusion_m2_s, runs->droplets * sizeof(double));
    merged->samples = g_memdup2(runs->samples, runs->droplets * sizeof(size_t));
    return merged;
}

RfFieldRuns *rf_field_runs_new(const RfTrail *trails, size_t n)
{
    Binned binned;
    g_autofree double *diffusion = g_new(double, n), *noise = g_new(double, n), *own = g_new(double, n);
    estimate_diffusion(trails, n, own, diffusion, noise);
    bin_all(trails, n, diffusion, noise, &binned);
    g_autofree size_t *cut = g_new0(size_t, binned.bins + 1);
    partition(&binned, cut);
    RfFieldRuns *runs = collect(&binned, cut);
    runs->diffusion_m2_s = g_steal_pointer(&diffusion);
    runs->own_diffusion_m2_s = g_steal_pointer(&own);
    runs->samples = g_new(size_t, n + 1);
    for (size_t j = 0; j < n; j++) runs->samples[j] = trails[j].n;
    for (size_t j = 0; j < n; j++) g_free(binned.trail[j].place_m);
    g_free(binned.trail);
    return runs;
}

void rf_field_runs_free(RfFieldRuns *runs)
{
    if (!runs) return;
    g_free(runs->edge_s);
    g_free(runs->is_blind);
    g_free(runs->span);
    g_free(runs->speed);
    g_free(runs->diffusion_m2_s);
    g_free(runs->own_diffusion_m2_s);
    g_free(runs->samples);
    g_free(runs);
}
