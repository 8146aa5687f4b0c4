#include "physics/switch_instant.h"

#include <math.h>

enum { SLICE_MAX = 4096 };
/* Positions this far from the searched window still help to fix where the droplet was. */
static const double MARGIN_S = 0.7;

typedef struct {
    double first_s, step_s;
    size_t n;
    double *log_likelihood; /* n, summed over witnesses */
} InstantGrid;

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

/* Positions in [from, to]; at least two on either side of the grid's middle, else none. */
static bool cut_slice(const RfTrail *trail, double from_s, double middle_s, double to_s, size_t *first,
                      size_t *n)
{
    size_t i = 0, before = 0, after = 0;
    while (i < trail->n && trail->samples[i].time_s < from_s) i++;
    *first = i;
    for (; i < trail->n && trail->samples[i].time_s <= to_s && i - *first < SLICE_MAX; i++)
        if (trail->samples[i].time_s < middle_s)
            before++;
        else
            after++;
    *n = before + after;
    return before >= 2 && after >= 2;
}

/* One column per instant of the grid: the path less what the droplet would do if the switch were then. */
static bool add_witness(const RfFieldTimeline *timeline, unsigned number, const RfSwitchWitness *w,
                        InstantGrid *grid, double from_s, double to_s)
{
    double middle_s = grid->first_s + 0.5 * grid->step_s * (double)(grid->n - 1), u_speed;
    double speed = speed_per_volt_at(w, middle_s, &u_speed);
    size_t first, n;
    const RfFieldInterval *before = &g_array_index(timeline->intervals, RfFieldInterval, number);
    if (!w->usable || is_step_near(w, from_s, to_s) ||
        !cut_slice(w->trail, from_s, middle_s, to_s, &first, &n))
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
                s[i].fall_m - s[0].fall_m - steady * t - (since > 0 ? change * since : 0);
        }
    }
    double log_det;
    if (!rf_path_likelihood_whiten(&w->noise, n, times_s, u_m, grid->n, columns, &log_det)) return false;
    for (size_t i = 0; i < n; i++)
        for (size_t g = 0; g < grid->n; g++)
            grid->log_likelihood[g] -= 0.5 * columns[i * grid->n + g] * columns[i * grid->n + g];
    return fabs(speed) > 3 * u_speed;
}

static RfValue grid_mean(const InstantGrid *grid)
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
    return (RfValue){grid->first_s + mean, sqrt(fmax(variance, grid->step_s * grid->step_s / 12))};
}

/* Likelihood of a switch over a window about its present place. */
static RfValue scan(const RfFieldTimeline *timeline, unsigned number, const RfSwitchWitness *witnesses,
                    size_t n, double half_window_s, size_t points, unsigned *droplets)
{
    const RfFieldInterval *before = &g_array_index(timeline->intervals, RfFieldInterval, number);
    double now_s = before->end_s, middle_before = 0.5 * (before->start_s + now_s);
    double middle_after = 0.5 * (now_s + before[1].end_s);
    double from_s = fmax(now_s - half_window_s, middle_before),
           to_s = fmin(now_s + half_window_s, middle_after);
    InstantGrid grid = {.first_s = from_s, .n = points, .step_s = (to_s - from_s) / (double)(points - 1)};
    grid.log_likelihood = g_new0(double, points);
    *droplets = 0;
    for (size_t j = 0; j < n; j++)
        if (add_witness(timeline, number, &witnesses[j], &grid, fmax(from_s - MARGIN_S, before->start_s),
                        fmin(to_s + MARGIN_S, before[1].end_s)))
            (*droplets)++;
    RfValue found = grid_mean(&grid);
    g_free(grid.log_likelihood);
    return found;
}

static RfValue find_instant(RfFieldTimeline *timeline, unsigned number, const RfSwitchWitness *witnesses,
                            size_t n, unsigned *droplets)
{
    RfFieldInterval *before = &g_array_index(timeline->intervals, RfFieldInterval, number);
    RfValue found = {before->end_s, 0};
    double half_window_s = 0.4;
    for (int pass = 0; pass < 3; pass++) {
        found = scan(timeline, number, witnesses, n, half_window_s, 129, droplets);
        if (*droplets == 0) return found; /* a flat likelihood: the window's middle and width */
        before->end_s = before[1].start_s = found.value;
        double wanted = fmax(6 * found.sigma, 0.01);
        if (pass > 0 && wanted < 2 * half_window_s && wanted > half_window_s / 4) break;
        half_window_s = fmin(wanted, 1);
    }
    return found;
}

void rf_switch_instant_refine(RfFieldTimeline *timeline, unsigned number, const RfSwitchWitness *witnesses,
                              size_t n)
{
    RfFieldSwitch *s = &g_array_index(timeline->switches, RfFieldSwitch, number);
    s->time_s = find_instant(timeline, number, witnesses, n, &s->droplets);
}
