#include "physics/charge_step.h"

#include <gsl/gsl_cdf.h>
#include <math.h>
#include <string.h>

#include "physics/drag.h"
#include "physics/droplet_path.h"

enum { BLOCK = 32, COARSE_PLACES = 250, PARTS_OF_A_FRAME = 4 };
/* Gain in log-likelihood below which a step is chance: that of a change by 5 sigma. The largest of a normalised bridge
 * passes b with probability b exp(-b^2/2)/sqrt(2 pi) (2 ln(1/e) (1 - 1/b^2) + 4/b^2), e the share of either end left
 * out (D. Siegmund, Ann. Stat. 14 (1986) 361, from memory): with b = 5 and e = 0.002, 9e-5 for a droplet. */
static const double GAIN_MIN = 12.5;
/* Either side must be watched under a field for so long: shorter ones can't tell a charge from a stumble. */
static const double SIDE_ON_MIN_S = 0.2;

typedef struct {
    double time_s;
    bool across_off;
    double width_s; /* that it stands for: of the off state, or to its neighbours */
    double gain;
} Place;

typedef struct {
    const RfTrail *trail;
    const RfDropletModel *model;
    RfDropletPath *path;
    RfPathNoise noise;
    size_t m;      /* columns of what is explained without a new step: data, impulses, time */
    double *known; /* n x m, whitened, data and regressors orthogonalised in turn */
} Scan;

/* Whitened columns made orthogonal one by one (modified Gram-Schmidt), the data last: what remains in column m-1 is
 * the residue. Regressors that add nothing become zero. */
static void orthogonalise(size_t n, size_t m, double *columns)
{
    for (size_t j = 0; j < m; j++) {
        double norm = 0, before = 0;
        for (size_t i = 0; i < n; i++) before += columns[i * m + j] * columns[i * m + j];
        for (size_t k = 0; k < j; k++) {
            double dot = 0;
            for (size_t i = 0; i < n; i++) dot += columns[i * m + k] * columns[i * m + j];
            for (size_t i = 0; i < n; i++) columns[i * m + j] -= dot * columns[i * m + k];
        }
        if (j + 1 == m) return;
        for (size_t i = 0; i < n; i++) norm += columns[i * m + j] * columns[i * m + j];
        double scale = norm > 1e-9 * before && norm > 0 ? 1 / sqrt(norm) : 0;
        for (size_t i = 0; i < n; i++) columns[i * m + j] *= scale;
    }
}

static bool scan_init(Scan *scan, const RfTrail *trail, const RfDropletModel *model, const RfDropletFit *fit)
{
    RfDropletPath *path = rf_droplet_path_new(trail, model);
    size_t n = path->n, m = path->charged + 2;
    *scan = (Scan){.trail = trail, .model = model, .path = path, .m = m, .known = g_new(double, n *m)};
    scan->noise =
        (RfPathNoise){fit->diffusion_m2_s.value, fit->fall_extra_variance_m2.value, model->fall_memory};
    for (size_t i = 0; i < n; i++) {
        double *row = scan->known + i * m;
        row[0] = path->times_s[i] - path->times_s[0];
        memcpy(row + 1, path->impulse_v_s + i * path->charged, path->charged * sizeof *row);
        row[m - 1] = path->fall_m[i];
    }
    double log_det;
    bool fine =
        rf_path_likelihood_whiten(&scan->noise, n, path->times_s, path->u_fall_m, m, scan->known, &log_det);
    if (fine) orthogonalise(n, m, scan->known);
    return fine;
}

static void scan_clear(Scan *scan)
{
    g_free(scan->known);
    rf_droplet_path_free(scan->path);
}

static double spell_end_s(const Scan *scan, double time_s)
{
    size_t k = 0;
    while (k < scan->model->steps && time_s >= scan->model->step_s[k]) k++;
    return k < scan->model->steps ? scan->model->step_s[k] : HUGE_VAL;
}

static double spell_start_s(const Scan *scan, double time_s)
{
    double start_s = -HUGE_VAL;
    for (size_t k = 0; k < scan->model->steps; k++)
        if (scan->model->step_s[k] <= time_s) start_s = fmax(start_s, scan->model->step_s[k]);
    return start_s;
}

/* What a change of charge at a place adds to the path, per unit of speed per volt. */
static void fill_candidate(const Scan *scan, double time_s, double *columns, size_t column)
{
    const RfFieldTimeline *timeline = scan->model->timeline;
    double start = rf_field_timeline_impulse_v_s(timeline, time_s), end_s = spell_end_s(scan, time_s);
    double end = isfinite(end_s) ? rf_field_timeline_impulse_v_s(timeline, end_s) : 0;
    for (size_t i = 0; i < scan->path->n; i++) {
        double t = scan->path->times_s[i];
        columns[i * BLOCK + column] =
            t <= time_s ? 0 : (t < end_s ? scan->path->total_impulse_v_s[i] : end) - start;
    }
}

/* Half the square of the residue's projection on what the column adds to the known ones. */
static void gains(const Scan *scan, const double *columns, size_t used, double *gain)
{
    size_t n = scan->path->n, m = scan->m;
    double norm[BLOCK] = {0}, dot[BLOCK] = {0};
    g_autofree double *along = g_new0(double, BLOCK *m);
    for (size_t i = 0; i < n; i++) {
        const double *row = columns + i * BLOCK, *known = scan->known + i * m;
        for (size_t b = 0; b < used; b++) {
            norm[b] += row[b] * row[b];
            dot[b] += row[b] * known[m - 1];
        }
        for (size_t k = 0; k + 1 < m; k++)
            for (size_t b = 0; b < used; b++) along[k * BLOCK + b] += row[b] * known[k];
    }
    for (size_t b = 0; b < used; b++) {
        double rest = norm[b];
        for (size_t k = 0; k + 1 < m; k++) rest -= along[k * BLOCK + b] * along[k * BLOCK + b];
        gain[b] = rest > 1e-6 * norm[b] && rest > 0 ? 0.5 * dot[b] * dot[b] / rest : 0;
    }
}

static void weigh_places(const Scan *scan, Place *places, size_t n)
{
    g_autofree double *columns = g_new0(double, scan->path->n *BLOCK);
    for (size_t first = 0; first < n; first += BLOCK) {
        size_t used = MIN(BLOCK, n - first);
        double gain[BLOCK] = {0}, log_det;
        for (size_t b = 0; b < BLOCK; b++)
            fill_candidate(scan, places[first + MIN(b, used - 1)].time_s, columns, b);
        if (rf_path_likelihood_whiten(&scan->noise, scan->path->n, scan->path->times_s, scan->path->u_fall_m,
                                      BLOCK, columns, &log_det))
            gains(scan, columns, used, gain);
        for (size_t b = 0; b < used; b++) places[first + b].gain = gain[b];
    }
}

/* Seconds under a field between two instants. */
static double on_between(const Scan *scan, double from_s, double to_s)
{
    const GArray *intervals = scan->model->timeline->intervals;
    double sum = 0;
    for (unsigned k = 0; k < intervals->len; k++) {
        const RfFieldInterval *v = &g_array_index(intervals, RfFieldInterval, k);
        double a = fmax(from_s, v->start_s), b = fmin(to_s, v->end_s);
        if (v->voltage_v != 0 && b > a) sum += b - a;
    }
    return sum;
}

static bool is_watched_enough(const Scan *scan, double time_s)
{
    const RfDropletPath *path = scan->path;
    double from_s = fmax(path->times_s[0], spell_start_s(scan, time_s));
    double to_s = fmin(path->times_s[path->n - 1], spell_end_s(scan, time_s));
    return on_between(scan, from_s, time_s) >= SIDE_ON_MIN_S &&
           on_between(scan, time_s, to_s) >= SIDE_ON_MIN_S;
}

static void add_on_place(const Scan *scan, double time_s, double width_s, GArray *places)
{
    Place place = {.time_s = time_s, .width_s = width_s};
    if (rf_field_timeline_at(scan->model->timeline, time_s)->voltage_v != 0 &&
        is_watched_enough(scan, time_s))
        g_array_append_val(places, place);
}

static size_t coarse_stride(const Scan *scan)
{
    return MAX(scan->path->n / COARSE_PLACES, 1);
}

/* Halfway between samples while the field is on, every so many, from one instant to another. */
static void add_coarse_places(const Scan *scan, double from_s, double to_s, GArray *places)
{
    const double *times_s = scan->path->times_s;
    size_t stride = coarse_stride(scan);
    for (size_t i = 0; i + 1 < scan->path->n; i += stride) {
        double t = 0.5 * (times_s[i] + times_s[i + 1]);
        if (t > from_s && t < to_s)
            add_on_place(scan, t, (double)stride * scan->path->typical_step_s, places);
    }
}

/* Several between any two samples, from one instant to another. */
static void add_fine_places(const Scan *scan, double from_s, double to_s, GArray *places)
{
    const double *times_s = scan->path->times_s;
    for (size_t i = 0; i + 1 < scan->path->n; i++) {
        double part_s = (times_s[i + 1] - times_s[i]) / PARTS_OF_A_FRAME;
        if (times_s[i + 1] < from_s || times_s[i] > to_s) continue;
        for (int p = 0; p < PARTS_OF_A_FRAME; p++)
            add_on_place(scan, times_s[i] + (p + 0.5) * part_s, part_s, places);
    }
}

/* One place per off state: wherever the step was in it, the path is the same. */
static void add_off_places(const Scan *scan, GArray *places)
{
    const GArray *intervals = scan->model->timeline->intervals;
    for (unsigned k = 0; k < intervals->len; k++) {
        const RfFieldInterval *v = &g_array_index(intervals, RfFieldInterval, k);
        Place place = {0.5 * (v->start_s + v->end_s), true, v->end_s - v->start_s, 0};
        if (v->voltage_v == 0 && is_watched_enough(scan, place.time_s)) g_array_append_val(places, place);
    }
}

static Place best_place(const GArray *places)
{
    Place best = {0};
    for (unsigned i = 0; i < places->len; i++)
        if (g_array_index(places, Place, i).gain > best.gain) best = g_array_index(places, Place, i);
    return best;
}

/* Every instant being as likely beforehand, an off state of some seconds outweighs the few frames beside it that explain
 * the path as well: the best off place, if its share of the chance is the larger one. */
static Place likeliest_place(const GArray *places)
{
    Place best = best_place(places), off = {0};
    double on_sum = 0;
    for (unsigned i = 0; i < places->len; i++) {
        const Place *p = &g_array_index(places, Place, i);
        if (p->across_off && p->gain > off.gain) off = *p;
        if (!p->across_off) on_sum += p->width_s * exp(p->gain - best.gain);
    }
    return off.gain > 0 && off.width_s * exp(off.gain - best.gain) > on_sum ? off : best;
}

/* A jump of the position alone (a swap, a mistaken spot) would do as well or better? */
static bool is_rather_a_jump(const Scan *scan, const Place *place)
{
    const RfDropletPath *path = scan->path;
    g_autofree double *columns = g_new0(double, path->n *BLOCK);
    double gain[BLOCK], log_det;
    size_t at = 0;
    while (at + 1 < path->n && path->times_s[at] < place->time_s) at++;
    for (size_t b = 0; b < BLOCK; b++)
        for (size_t i = 0; i < path->n; i++) columns[i * BLOCK + b] = i + BLOCK / 2 >= at + b ? 1 : 0;
    if (!rf_path_likelihood_whiten(&scan->noise, path->n, path->times_s, path->u_fall_m, BLOCK, columns,
                                   &log_det))
        return false;
    gains(scan, columns, BLOCK, gain);
    for (size_t b = 0; b < BLOCK; b++)
        if (gain[b] >= place->gain) return true;
    return false;
}

/* Mean and spread of the instant over the places near the best, each weighted by its likelihood. */
static RfValue weighted_instant(const GArray *places, const Place *best)
{
    double weight = 0, first = 0, second = 0;
    for (unsigned i = 0; i < places->len; i++) {
        const Place *p = &g_array_index(places, Place, i);
        double w = p->width_s * exp(p->gain - best->gain), t = p->time_s - best->time_s;
        weight += w;
        first += w * t;
        second += w * t * t;
    }
    double mean = first / weight, variance = second / weight - mean * mean;
    return (RfValue){best->time_s + mean, sqrt(fmax(variance, 0) + best->width_s * best->width_s / 12)};
}

static Place search_spell(const Scan *scan)
{
    g_autoptr(GArray) places = g_array_new(FALSE, TRUE, sizeof(Place));
    add_coarse_places(scan, -HUGE_VAL, HUGE_VAL, places);
    add_off_places(scan, places);
    weigh_places(scan, (Place *)(void *)places->data, places->len);
    return likeliest_place(places);
}

/* Closely around a coarse place, and coarsely in the rest of its spell, where a small step may have been as well; the
 * instant with its sigma, and the gain there. */
static RfValue settle_instant(const Scan *scan, Place *place)
{
    if (place->across_off) return (RfValue){place->time_s, place->width_s / sqrt(12)};
    g_autoptr(GArray) places = g_array_new(FALSE, TRUE, sizeof(Place));
    double reach_s = fmax(0.6, 2 * scan->path->typical_step_s * (double)coarse_stride(scan));
    double from_s = place->time_s - reach_s, to_s = place->time_s + reach_s;
    add_coarse_places(scan, spell_start_s(scan, place->time_s), from_s, places);
    add_fine_places(scan, from_s, to_s, places);
    add_coarse_places(scan, to_s, spell_end_s(scan, place->time_s), places);
    weigh_places(scan, (Place *)(void *)places->data, places->len);
    Place best = best_place(places);
    if (!(best.gain > 0)) return (RfValue){place->time_s, reach_s / sqrt(3)};
    *place = best;
    return weighted_instant(places, &best);
}

typedef struct {
    size_t n;
    double time_s[RF_DROPLET_SPELLS_MAX];
    RfChargeStep step[RF_DROPLET_SPELLS_MAX];
} StepList;

static void insert_step(StepList *list, const RfChargeStep *step)
{
    size_t at = list->n++;
    for (; at > 0 && list->time_s[at - 1] > step->time_s.value; at--) {
        list->time_s[at] = list->time_s[at - 1];
        list->step[at] = list->step[at - 1];
    }
    list->time_s[at] = step->time_s.value;
    list->step[at] = *step;
}

static void remove_step(StepList *list, size_t at)
{
    list->n--;
    for (; at < list->n; at++) {
        list->time_s[at] = list->time_s[at + 1];
        list->step[at] = list->step[at + 1];
    }
}

static RfDropletModel with_steps(const RfDropletModel *model, const StepList *list)
{
    RfDropletModel with = *model;
    with.step_s = list->time_s;
    with.steps = list->n;
    return with;
}

/* The best further step, if it stands out. */
static bool find_one(const RfTrail *trail, const RfDropletModel *model, const RfDropletFit *fit,
                     StepList *list)
{
    RfDropletModel with = with_steps(model, list);
    Scan scan;
    bool found = false;
    if (scan_init(&scan, trail, &with, fit)) {
        Place place = search_spell(&scan);
        /* A coarse place may lie beside the summit: a little less will do before it is settled. */
        if (place.gain > GAIN_MIN - 3) {
            RfChargeStep step = {.across_off = place.across_off};
            step.time_s = settle_instant(&scan, &place);
            step.log_likelihood_gain = place.gain;
            found = place.gain > GAIN_MIN && !is_rather_a_jump(&scan, &place);
            if (found) insert_step(list, &step);
        }
    }
    scan_clear(&scan);
    return found;
}

/* Each step once more, given all the others; one that no longer stands out goes. */
static void settle_all(const RfTrail *trail, const RfDropletModel *model, const RfDropletFit *fit,
                       StepList *list)
{
    for (size_t k = 0; k < list->n;) {
        RfChargeStep step = list->step[k];
        Place place = {step.time_s.value, step.across_off, step.time_s.sigma * sqrt(12), 0};
        StepList others = *list;
        remove_step(&others, k);
        RfDropletModel with = with_steps(model, &others);
        Scan scan;
        if (scan_init(&scan, trail, &with, fit)) {
            if (place.across_off) weigh_places(&scan, &place, 1);
            step.time_s = settle_instant(&scan, &place);
            step.log_likelihood_gain = place.gain;
        }
        scan_clear(&scan);
        *list = others;
        if (step.log_likelihood_gain <= GAIN_MIN) continue;
        insert_step(list, &step);
        k++;
    }
}

static void fill_charges(const RfDropletFit *fit, StepList *list)
{
    for (size_t k = 0; k < list->n; k++) {
        const RfSpellFit *before = &fit->spell[k], *after = before + 1;
        RfChargeStep *step = &list->step[k];
        step->before_coulomb = before->charge_coulomb;
        step->after_coulomb = after->charge_coulomb;
        double variance = before->charge_coulomb.sigma * before->charge_coulomb.sigma +
                          after->charge_coulomb.sigma * after->charge_coulomb.sigma -
                          2 * before->covariance_with_next_coulomb2;
        step->change_coulomb =
            (RfValue){after->charge_coulomb.value - before->charge_coulomb.value, sqrt(fmax(variance, 0))};
    }
}

GArray *rf_charge_step_find(const RfTrail *trail, const RfDropletModel *model, const RfDropletFit *fit)
{
    GArray *steps = g_array_new(FALSE, TRUE, sizeof(RfChargeStep));
    RfDropletModel plain = *model;
    plain.steps = 0;
    if (!model->timeline || fit->state != RF_FIT_DONE) return steps;
    StepList list = {0};
    RfDropletFit now = *fit;
    while (list.n + 1 < RF_DROPLET_SPELLS_MAX && find_one(trail, &plain, &now, &list)) {
        RfDropletModel with = with_steps(&plain, &list);
        rf_droplet_fit(trail, &with, &now);
        if (now.state != RF_FIT_DONE) return steps;
    }
    if (list.n == 0) return steps;
    settle_all(trail, &plain, &now, &list);
    RfDropletModel with = with_steps(&plain, &list);
    rf_droplet_fit(trail, &with, &now);
    if (now.state != RF_FIT_DONE) return steps;
    fill_charges(&now, &list);
    g_array_append_vals(steps, list.step, (unsigned)list.n);
    return steps;
}

double rf_charge_step_whole_multiples_p(const RfChargeStep *step, double unit_coulomb)
{
    double change = fabs(step->change_coulomb.value), sigma = step->change_coulomb.sigma;
    if (!(sigma < unit_coulomb / 3)) return 1;
    double nearest = fmax(round(change / unit_coulomb), 1) * unit_coulomb;
    return 2 * gsl_cdf_ugaussian_Q(fabs(change - nearest) / sigma);
}
