#include "physics/switch_instant.h"

#include <math.h>

enum { SLICE_MAX = 4096 };
/* Positions this far from the searched window still help to fix where the droplet was. */
static const double MARGIN_S = 0.7;

typedef struct {
    double first_s, step_s;
    size_t n;
    double exposure_s;      /* a position is the mean over this long about its time */
    double *log_likelihood; /* n, summed over witnesses, each bounded */
    double *gain;           /* n or NULL: against the instant `edge`, summed, each bounded below only */
    size_t edge;
} InstantGrid;

/* Mean over the exposure of the time since a switch, nothing before it. */
static double blurred_ramp(double since_s, double exposure_s)
{
    double half = exposure_s / 2;
    if (since_s >= half) return since_s;
    return since_s <= -half ? 0 : (since_s + half) * (since_s + half) / (2 * exposure_s);
}

static double speed_per_volt_at(const RfSwitchWitness *w, double time_s, double *u)
{
    size_t k = 0;
    while (k + 1 < w->spells && time_s >= w->spell_end_s[k]) k++;
    *u = w->u_speed_per_volt_m_s_v[k];
    return w->speed_per_volt_m_s_v[k];
}

/* A change of charge so close to the switch would be taken for it. */
static bool is_step_near(const RfSwitchWitness *w, double from_s, double to_s)
{
    for (size_t k = 0; k + 1 < w->spells; k++)
        if (w->spell_end_s[k] > from_s && w->spell_end_s[k] < to_s) return true;
    return false;
}

static size_t first_from(const RfTrail *trail, double from_s)
{
    size_t low = 0, high = trail->n;
    while (low < high) {
        size_t middle = low + (high - low) / 2;
        if (trail->samples[middle].time_s < from_s)
            low = middle + 1;
        else
            high = middle;
    }
    return low;
}

/* Positions in [from, to]; at least two on either side of the grid's middle, else none. */
static bool cut_slice(const RfTrail *trail, double from_s, double middle_s, double to_s, size_t *first,
                      size_t *n)
{
    size_t i = first_from(trail, from_s), before = 0, after = 0;
    *first = i;
    for (; i < trail->n && trail->samples[i].time_s <= to_s && i - *first < SLICE_MAX; i++)
        if (trail->samples[i].time_s < middle_s)
            before++;
        else
            after++;
    *n = before + after;
    return before >= 2 && after >= 2;
}

/* A droplet that is wrong (swapped, colliding) about this switch must not outvote the rest: its likelihood is mixed with
 * a flat one that it would be wrong once in a thousand times. */
static void add_bounded(const double *columns, size_t n, InstantGrid *grid)
{
    g_autofree double *own = g_new0(double, grid->n);
    double top = -HUGE_VAL;
    for (size_t i = 0; i < n; i++)
        for (size_t g = 0; g < grid->n; g++)
            own[g] -= 0.5 * columns[i * grid->n + g] * columns[i * grid->n + g];
    for (size_t g = 0; g < grid->n; g++) top = fmax(top, own[g]);
    for (size_t g = 0; g < grid->n; g++) grid->log_likelihood[g] += top + log(exp(own[g] - top) + 1e-3);
    for (size_t g = 0; grid->gain && g < grid->n; g++) {
        double more = own[g] - own[grid->edge];
        grid->gain[g] += more > 30 ? more : log(exp(more) + 1e-3);
    }
}

/* One column per instant of the grid: the path less what the droplet would do if the switch were then. */
static bool add_witness(const RfFieldTimeline *timeline, unsigned number, const RfSwitchWitness *w,
                        InstantGrid *grid, double from_s, double to_s)
{
    if (!w->usable) return false;
    double middle_s = grid->first_s + 0.5 * grid->step_s * (double)(grid->n - 1), u_speed;
    double speed = speed_per_volt_at(w, middle_s, &u_speed);
    size_t first, n;
    const RfFieldInterval *before = &g_array_index(timeline->intervals, RfFieldInterval, number);
    if (is_step_near(w, from_s, to_s) || !cut_slice(w->trail, from_s, middle_s, to_s, &first, &n))
        return false;
    double change = speed * (before[1].voltage_v - before[0].voltage_v);
    g_autofree double *columns = g_new(double, n * grid->n), *times_s = g_new(double, n),
                      *u_m = g_new(double, n);
    const RfSample *s = w->trail->samples + first;
    for (size_t i = 0; i < n; i++) {
        double t = times_s[i] = s[i].time_s, steady = w->fall_m_s + speed * before[0].voltage_v;
        u_m[i] = s[i].u_fall_m;
        for (size_t g = 0; g < grid->n; g++) {
            double since = t - grid->first_s - grid->step_s * (double)g;
            columns[i * grid->n + g] =
                s[i].fall_m - s[0].fall_m - steady * t - change * blurred_ramp(since, grid->exposure_s);
        }
    }
    double log_det;
    if (!rf_path_likelihood_whiten(&w->noise, n, times_s, u_m, grid->n, columns, &log_det)) return false;
    add_bounded(columns, n, grid);
    return fabs(speed) > 3 * u_speed;
}

/* Mean and spread of the likelihood. */
typedef struct {
    RfValue time_s;
    unsigned droplets;
} Instant;

static Instant grid_mean(const InstantGrid *grid)
{
    double top = -HUGE_VAL, weight = 0, first = 0, second = 0;
    for (size_t g = 0; g < grid->n; g++) top = fmax(top, grid->log_likelihood[g]);
    for (size_t g = 0; g < grid->n; g++) {
        double w = exp(grid->log_likelihood[g] - top), t = grid->step_s * (double)g;
        weight += w;
        first += w * t;
        second += w * t * t;
    }
    double mean = first / weight, variance = second / weight - mean * mean;
    double sigma = sqrt(fmax(variance, grid->step_s * grid->step_s / 12));
    return (Instant){{grid->first_s + mean, sigma}, 0};
}

enum { POINTS = 129 };

/* Fills the grid over a window; returns how many droplets tell. */
static unsigned fill_grid(const RfFieldTimeline *timeline, unsigned number, const RfSwitchWitness *witnesses,
                          size_t n, double from_s, double to_s, InstantGrid *grid)
{
    const RfFieldInterval *before = &g_array_index(timeline->intervals, RfFieldInterval, number);
    unsigned droplets = 0;
    grid->first_s = from_s;
    grid->step_s = (to_s - from_s) / (double)(grid->n - 1);
    for (size_t j = 0; j < n; j++)
        if (add_witness(timeline, number, &witnesses[j], grid, fmax(from_s - MARGIN_S, before->start_s),
                        fmin(to_s + MARGIN_S, before[1].end_s)))
            droplets++;
    return droplets;
}

/* Likelihood of a switch over a window about its present place, up to the middle of the intervals beside it; at the ends
 * of the recording, where no other switch is near, up to these. */
static Instant scan(const RfFieldTimeline *timeline, unsigned number, const RfSwitchWitness *witnesses,
                    size_t n, double half_window_s, double exposure_s)
{
    const RfFieldInterval *before = &g_array_index(timeline->intervals, RfFieldInterval, number);
    double now_s = before->end_s, log_likelihood[POINTS] = {0};
    double earliest_s = number == 0 ? before->start_s : 0.5 * (before->start_s + now_s);
    double latest_s =
        number + 2 == timeline->intervals->len ? before[1].end_s : 0.5 * (now_s + before[1].end_s);
    InstantGrid grid = {.n = POINTS, .exposure_s = exposure_s, .log_likelihood = log_likelihood};
    unsigned droplets = fill_grid(timeline, number, witnesses, n, fmax(now_s - half_window_s, earliest_s),
                                  fmin(now_s + half_window_s, latest_s), &grid);
    Instant found = grid_mean(&grid);
    found.droplets = droplets;
    return found;
}

static void move_switch(RfFieldTimeline *timeline, unsigned number, double time_s)
{
    RfFieldInterval *before = &g_array_index(timeline->intervals, RfFieldInterval, number);
    before->end_s = before[1].start_s = time_s;
}

/* Narrows the window about a switch until it holds the likelihood closely. A flat likelihood, when nobody tells,
 * keeps the window's middle. */
static void home_in(RfFieldTimeline *timeline, unsigned number, const RfSwitchWitness *witnesses, size_t n,
                    double exposure_s, Instant *found)
{
    double half_window_s = 0.4;
    for (int pass = 0; pass < 3; pass++) {
        *found = scan(timeline, number, witnesses, n, half_window_s, exposure_s);
        if (found->droplets == 0) return;
        move_switch(timeline, number, found->time_s.value);
        double wanted = fmax(6 * found->time_s.sigma, 0.01);
        if (pass > 0 && wanted < 2 * half_window_s && wanted > half_window_s / 4) break;
        half_window_s = fmin(wanted, 1);
    }
}

static void set_switch(RfFieldTimeline *timeline, unsigned number, RfValue time_s, unsigned droplets)
{
    RfFieldSwitch *s = &g_array_index(timeline->switches, RfFieldSwitch, number);
    s->droplets = droplets;
    if (droplets == 0 && s->has_log_time) return; /* the log knows better than nobody */
    s->time_s = time_s;
    if (droplets > 0) move_switch(timeline, number, time_s.value);
}

/* Frame interval, from the longest trail. */
static double frame_interval(const RfSwitchWitness *witnesses, size_t n)
{
    const RfTrail *longest = NULL;
    for (size_t j = 0; j < n; j++)
        if (witnesses[j].usable && (!longest || witnesses[j].trail->n > longest->n))
            longest = witnesses[j].trail;
    if (!longest || longest->n < 2) return 0;
    return (longest->samples[longest->n - 1].time_s - longest->samples[0].time_s) / (double)(longest->n - 1);
}

void rf_switch_instant_refine(RfFieldTimeline *timeline, unsigned number, const RfSwitchWitness *witnesses,
                              size_t n)
{
    Instant found;
    home_in(timeline, number, witnesses, n, 0.5 * frame_interval(witnesses, n), &found);
    set_switch(timeline, number, found.time_s, found.droplets);
}

RfSwitchGain rf_switch_instant_gain(const RfFieldTimeline *timeline, unsigned number,
                                    const RfSwitchWitness *witnesses, size_t n, bool is_first)
{
    static const double reach_s = 0.5;
    const RfFieldInterval *v = &g_array_index(timeline->intervals, RfFieldInterval, number);
    double log_likelihood[POINTS] = {0}, gain[POINTS] = {0};
    RfSwitchGain found = {0, 0};
    double from_s = is_first ? v->start_s : fmax(v[1].end_s - reach_s, v->start_s);
    double to_s = is_first ? fmin(v->start_s + reach_s, v[1].end_s) : v[1].end_s;
    InstantGrid grid = {.n = POINTS,
                        .exposure_s = 0.5 * frame_interval(witnesses, n),
                        .log_likelihood = log_likelihood,
                        .gain = gain,
                        .edge = is_first ? 0 : POINTS - 1};
    if (fill_grid(timeline, number, witnesses, n, from_s, to_s, &grid) == 0) return found;
    for (size_t g = 0; g < POINTS; g++) {
        found.bounded = fmax(found.bounded, log_likelihood[g] - log_likelihood[grid.edge]);
        found.open = fmax(found.open, gain[g]);
    }
    return found;
}
