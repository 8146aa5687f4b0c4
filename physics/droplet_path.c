#include "physics/droplet_path.h"

#include <math.h>
#include <stdlib.h>

static int compare_doubles(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

static double median_step(size_t n, const double *times_s)
{
    if (n < 2) return 1;
    g_autofree double *steps = g_new(double, n - 1);
    for (size_t i = 0; i + 1 < n; i++) steps[i] = times_s[i + 1] - times_s[i];
    qsort(steps, n - 1, sizeof *steps, compare_doubles);
    return steps[(n - 1) / 2];
}

static void copy_samples(RfDropletPath *path, const RfTrail *trail, const RfDropletModel *model)
{
    const RfSample *s = trail->samples;
    double sum_u2 = 0;
    for (size_t i = 0; i < path->n; i++) {
        path->times_s[i] = s[i].time_s;
        path->fall_m[i] = s[i].fall_m - s[0].fall_m - rf_common_drift_fall_m(model->drift, s[i].time_s);
        path->across_m[i] = s[i].drift_m - s[0].drift_m - rf_common_drift_across_m(model->drift, s[i].time_s);
        path->u_fall_m[i] = s[i].u_fall_m;
        path->u_across_m[i] = s[i].u_drift_m;
        sum_u2 += s[i].u_fall_m * s[i].u_fall_m + s[i].u_drift_m * s[i].u_drift_m;
        path->total_impulse_v_s[i] =
            model->timeline ? rf_field_timeline_impulse_v_s(model->timeline, s[i].time_s) : 0;
    }
    path->mean_u2_m2 = sum_u2 / (2.0 * (double)path->n);
    path->typical_step_s = median_step(path->n, path->times_s);
}

static double on_time(const RfFieldTimeline *timeline, double start_s, double end_s)
{
    double on_s = 0;
    for (unsigned k = 0; timeline && k < timeline->intervals->len; k++) {
        const RfFieldInterval *v = &g_array_index(timeline->intervals, RfFieldInterval, k);
        bool is_last = k + 1 == timeline->intervals->len;
        double from = k == 0 ? start_s : fmax(start_s, v->start_s),
               to = is_last ? end_s : fmin(end_s, v->end_s);
        if (v->voltage_v != 0 && to > from) on_s += to - from;
    }
    return on_s;
}

static double spell_start(const RfDropletModel *model, size_t spell)
{
    return spell == 0 ? -HUGE_VAL : model->step_s[spell - 1];
}

static double spell_end(const RfDropletModel *model, size_t spell)
{
    return spell == model->steps ? HUGE_VAL : model->step_s[spell];
}

static void cut_spells(RfDropletPath *path, const RfDropletModel *model)
{
    size_t i = 0;
    path->spells = model->steps + 1;
    path->charged = 0;
    for (size_t k = 0; k < path->spells; k++) {
        path->first[k] = i;
        while (i < path->n && path->times_s[i] < spell_end(model, k)) i++;
        path->end[k] = i;
        double from = fmax(path->times_s[0], spell_start(model, k));
        double to = fmin(path->times_s[path->n - 1], spell_end(model, k));
        path->on_s[k] = to > from ? on_time(model->timeline, from, to) : 0;
        path->column[k] = path->on_s[k] > 0 ? (int)path->charged++ : -1;
    }
}

static void fill_impulses(RfDropletPath *path, const RfDropletModel *model)
{
    for (size_t k = 0; k < path->spells; k++) {
        if (path->column[k] < 0) continue;
        double start = spell_start(model, k), end = spell_end(model, k);
        double at_start = k == 0 ? 0 : rf_field_timeline_impulse_v_s(model->timeline, start);
        double at_end = k == model->steps ? 0 : rf_field_timeline_impulse_v_s(model->timeline, end);
        for (size_t i = 0; i < path->n; i++) {
            double t = path->times_s[i], total = path->total_impulse_v_s[i];
            path->impulse_v_s[i * path->charged + (size_t)path->column[k]] = (t >= end    ? at_end
                                                                              : t < start ? at_start
                                                                                          : total) -
                                                                             at_start;
        }
    }
}

RfDropletPath *rf_droplet_path_new(const RfTrail *trail, const RfDropletModel *model)
{
    RfDropletPath *path = g_new0(RfDropletPath, 1);
    g_assert(trail->n > 0 && model->steps < RF_DROPLET_SPELLS_MAX);
    path->n = trail->n;
    double **columns[] = {&path->times_s,  &path->fall_m,     &path->across_m,
                          &path->u_fall_m, &path->u_across_m, &path->total_impulse_v_s};
    for (size_t k = 0; k < G_N_ELEMENTS(columns); k++) *columns[k] = g_new(double, path->n);
    copy_samples(path, trail, model);
    cut_spells(path, model);
    path->impulse_v_s = g_new(double, path->n *MAX(path->charged, 1));
    path->scratch = g_new(double, path->n *(path->charged + 2));
    fill_impulses(path, model);
    return path;
}

void rf_droplet_path_free(RfDropletPath *path)
{
    if (!path) return;
    g_free(path->times_s);
    g_free(path->fall_m);
    g_free(path->across_m);
    g_free(path->u_fall_m);
    g_free(path->u_across_m);
    g_free(path->total_impulse_v_s);
    g_free(path->impulse_v_s);
    g_free(path->scratch);
    g_free(path);
}

void rf_droplet_path_scatter(const RfDropletPath *path, double *diffusion_m2_s, double *noise_m2)
{
    size_t n = path->n;
    double span = path->times_s[n - 1] - path->times_s[0], speed = path->across_m[n - 1] / span;
    double squares = 0, neighbours = 0, neighbours_s = 0, before = 0;
    for (size_t i = 1; i < n; i++) {
        double dt = path->times_s[i] - path->times_s[i - 1];
        double dx = path->across_m[i] - path->across_m[i - 1] - speed * dt;
        squares += dx * dx;
        if (i > 1) {
            neighbours += dx * before;
            neighbours_s += dt;
        }
        before = dx;
    }
    double covariance = n > 2 ? neighbours / (double)(n - 2) : 0;
    *diffusion_m2_s = squares / (2 * span) + (n > 2 ? neighbours / neighbours_s : 0);
    *noise_m2 = -covariance;
}
