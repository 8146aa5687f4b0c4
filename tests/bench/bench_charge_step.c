/* Charge steps found, missed and invented, over many droplets; half of them have none. Prints figures, judges nothing.
 * A step counts as standing out by 5 sigma where its size is at least five times the sigma that diffusion allows for
 * the speeds before and after. Instants are set against those of whoever knows all else about the droplet, and against
 * the bound within one frame, sqrt(2 D dt)/(change of speed), which nobody reaches unless the change shows in a frame.
 * Argument: number of droplets (600). */
#include <gsl/gsl_errno.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>

#include "physics/charge_step.h"
#include "physics/constants.h"
#include "physics/drag.h"
#include "tests/support/droplet_walk.h"

static const double E = RF_ELEMENTARY_CHARGE_COULOMB, VOLTAGE_V = 250, END_S = 30;
static const double SWITCHES_S[] = {4, 9, 13, 18, 22, 27};

typedef struct {
    unsigned droplets, plain, invented, large, found, small, small_found, within_1, within_2, timed;
    double miss_over_u[4096], miss_over_bound[4096], knowing_over_bound[4096], miss_s[4096], knowing_s[4096];
} Tally;

static int compare_doubles(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

static double median(double *values, unsigned n)
{
    qsort(values, n, sizeof *values, compare_doubles);
    return n > 0 ? values[n / 2] : 0;
}

static Walk random_walk(const RfFieldTimeline *timeline, bool has_step, gsl_rng *random)
{
    Walk walk = {.medium = &WALK_MEDIUM,
                 .timeline = timeline,
                 .radius_m = (0.35 + 0.4 * gsl_rng_uniform(random)) * 1e-6,
                 .charge_coulomb = E * ((double)gsl_rng_uniform_int(random, 9) - 4),
                 .end_s = END_S,
                 .frame_s = 1.0 / 25,
                 .exposure = 0.5,
                 .noise_m = (0.05 + 0.25 * gsl_rng_uniform(random)) * 1e-6};
    if (!has_step) return walk;
    do walk.step_s = 1 + (END_S - 2) * gsl_rng_uniform(random);
    while (rf_field_timeline_at(timeline, walk.step_s)->state == RF_FIELD_OFF);
    do walk.charge_after_coulomb = walk.charge_coulomb + E * ((double)gsl_rng_uniform_int(random, 7) - 3);
    while (fabs(walk.charge_after_coulomb - walk.charge_coulomb) < 0.5 * E);
    return walk;
}

/* Seconds under the field in [from, to]. */
static double on_seconds(const RfFieldTimeline *timeline, double from_s, double to_s)
{
    return (rf_field_timeline_impulse_v_s(timeline, to_s) - rf_field_timeline_impulse_v_s(timeline, from_s)) /
           VOLTAGE_V;
}

/* Sigma of the change that diffusion allows at best, radius and fall taken as known (they are common to both sides). */
static double change_bound(const RfFieldTimeline *timeline, const Walk *walk)
{
    double diffusion = rf_drag_diffusion_m2_s(&WALK_MEDIUM, walk->radius_m);
    double before_s = on_seconds(timeline, 0, walk->step_s),
           after_s = on_seconds(timeline, walk->step_s, END_S);
    double u_speed_m_s = sqrt(2 * diffusion * (1 / before_s + 1 / after_s));
    return u_speed_m_s * rf_drag_coefficient_kg_s(&WALK_MEDIUM, walk->radius_m) * WALK_MEDIUM.plate_gap_m /
           VOLTAGE_V;
}

static double speed_change_m_s(const Walk *walk)
{
    return (walk->charge_after_coulomb - walk->charge_coulomb) * VOLTAGE_V /
           (rf_drag_coefficient_kg_s(&WALK_MEDIUM, walk->radius_m) * WALK_MEDIUM.plate_gap_m);
}

enum { INSTANTS = 401 };
static const double INSTANTS_REACH_S = 1;

/* Minus what a step at each of the instants would add to the path, beside the path less all else. */
static void fill_knowing(const RfFieldTimeline *timeline, const Walk *walk, const RfTrail *trail,
                         double *columns)
{
    double per_impulse = speed_change_m_s(walk) / VOLTAGE_V;
    double before = per_impulse * walk->charge_coulomb / (walk->charge_after_coulomb - walk->charge_coulomb);
    double fall_m_s = rf_drag_settling_speed_m_s(&WALK_MEDIUM, walk->radius_m);
    for (size_t i = 0; i < trail->n; i++) {
        const RfSample *s = &trail->samples[i];
        double impulse = rf_field_timeline_impulse_v_s(timeline, s->time_s);
        for (int g = 0; g < INSTANTS; g++) {
            double at_s = walk->step_s + INSTANTS_REACH_S * (2.0 * g / (INSTANTS - 1) - 1);
            double since = s->time_s > at_s ? impulse - rf_field_timeline_impulse_v_s(timeline, at_s) : 0;
            columns[i * INSTANTS + (size_t)g] =
                s->fall_m - fall_m_s * s->time_s - before * impulse - per_impulse * since;
        }
    }
}

/* Error of the mean of the likelihood over the instants within a second of the step, everything but it known. */
static double knowing_miss_s(const RfFieldTimeline *timeline, const Walk *walk, const RfTrail *trail)
{
    double diffusion = rf_drag_diffusion_m2_s(&WALK_MEDIUM, walk->radius_m), log_det, sum = 0, first = 0;
    g_autofree double *columns = g_new(double, trail->n *INSTANTS), *time_s = g_new(double, 2 * trail->n);
    double *u_m = time_s + trail->n, height[INSTANTS] = {0}, top = -HUGE_VAL;
    /* Exposed for half a frame, R = 1/12. */
    const RfPathNoise noise = {diffusion, -2 * diffusion * walk->frame_s / 12, {0, 0, 0}};
    for (size_t i = 0; i < trail->n; i++) {
        time_s[i] = trail->samples[i].time_s;
        u_m[i] = trail->samples[i].u_fall_m;
    }
    fill_knowing(timeline, walk, trail, columns);
    if (!rf_path_likelihood_whiten(&noise, trail->n, time_s, u_m, INSTANTS, columns, &log_det)) return 0;
    for (size_t i = 0; i < trail->n; i++)
        for (int g = 0; g < INSTANTS; g++)
            height[g] -= 0.5 * columns[i * INSTANTS + (size_t)g] * columns[i * INSTANTS + (size_t)g];
    for (int g = 0; g < INSTANTS; g++) top = fmax(top, height[g]);
    for (int g = 0; g < INSTANTS; g++) {
        double at_s = walk->step_s + INSTANTS_REACH_S * (2.0 * g / (INSTANTS - 1) - 1);
        if (rf_field_timeline_at(timeline, at_s)->voltage_v == 0) continue;
        sum += exp(height[g] - top);
        first += exp(height[g] - top) * (at_s - walk->step_s);
    }
    return fabs(first / sum);
}

static void time_step(const RfFieldTimeline *timeline, const Walk *walk, const RfTrail *trail,
                      const RfChargeStep *step, Tally *tally)
{
    double miss_s = fabs(step->time_s.value - walk->step_s), z = miss_s / step->time_s.sigma;
    double bound_s = sqrt(2 * rf_drag_diffusion_m2_s(&WALK_MEDIUM, walk->radius_m) * walk->frame_s) /
                     fabs(speed_change_m_s(walk));
    if (tally->timed == G_N_ELEMENTS(tally->miss_over_u)) return;
    unsigned at = tally->timed++;
    tally->within_1 += z < 1;
    tally->within_2 += z < 2;
    tally->miss_over_u[at] = z;
    tally->miss_s[at] = miss_s;
    tally->knowing_s[at] = knowing_miss_s(timeline, walk, trail);
    tally->miss_over_bound[at] = miss_s / bound_s;
    tally->knowing_over_bound[at] = tally->knowing_s[at] / bound_s;
}

static void count_steps(const RfFieldTimeline *timeline, const Walk *walk, const RfTrail *trail,
                        bool is_large, const GArray *steps, Tally *tally)
{
    bool is_found = false;
    for (guint k = 0; k < steps->len; k++) {
        const RfChargeStep *step = &g_array_index(steps, RfChargeStep, k);
        double miss_s = fabs(step->time_s.value - walk->step_s);
        bool is_it = walk->step_s > 0 && !is_found && miss_s < fmax(1, 4 * step->time_s.sigma);
        tally->invented += !is_it;
        if (!is_it) continue;
        is_found = true;
        if (is_large) time_step(timeline, walk, trail, step, tally);
    }
    if (walk->step_s > 0) *(is_large ? &tally->found : &tally->small_found) += is_found;
}

static void measure(const RfFieldTimeline *timeline, bool has_step, gsl_rng *random, Tally *tally)
{
    Walk walk = random_walk(timeline, has_step, random);
    RfTrail trail = walk_trail_new(&walk, 1, random);
    RfDropletModel model = {.medium = &WALK_MEDIUM, .timeline = timeline};
    RfDropletFit fit;
    rf_droplet_fit(&trail, &model, &fit);
    g_autoptr(GArray) steps = rf_charge_step_find(&trail, &model, &fit);
    bool is_large =
        has_step && fabs(walk.charge_after_coulomb - walk.charge_coulomb) > 5 * change_bound(timeline, &walk);
    tally->droplets++;
    tally->plain += !has_step;
    tally->large += is_large;
    tally->small += has_step && !is_large;
    count_steps(timeline, &walk, &trail, is_large, steps, tally);
    walk_trail_clear(&trail);
}

int main(int argc, char **argv)
{
    int droplets = argc > 1 ? atoi(argv[1]) : 600;
    gsl_set_error_handler_off();
    g_autoptr(RfFieldTimeline) timeline =
        walk_timeline_new(SWITCHES_S, G_N_ELEMENTS(SWITCHES_S), RF_FIELD_TOP_PLUS, VOLTAGE_V, END_S);
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937); /* its default seed, 4357 */
    Tally t = {0};
    for (int i = 0; i < droplets; i++) measure(timeline, i % 2 == 1, random, &t);
    printf("droplets               %u, %u without a step\n", t.droplets, t.plain);
    printf("invented               %u (%.4f per droplet)\n", t.invented, (double)t.invented / t.droplets);
    printf("recall, over 5 sigma   %.3f of %u\n", (double)t.found / t.large, t.large);
    printf("recall, below          %.3f of %u\n", t.small ? (double)t.small_found / t.small : 0, t.small);
    printf("instant within 1 sigma %.3f (0.683 expected), within 2 %.3f (0.954 expected)\n",
           (double)t.within_1 / t.timed, (double)t.within_2 / t.timed);
    printf("median |error|/u       %.3f (0.674 of a Gaussian)\n", median(t.miss_over_u, t.timed));
    printf("median |error|         %.4f s, knowing all else %.4f s\n", median(t.miss_s, t.timed),
           median(t.knowing_s, t.timed));
    printf("median |error|/bound   %.2f, knowing all else %.2f (0.674 of a Gaussian at the bound)\n",
           median(t.miss_over_bound, t.timed), median(t.knowing_over_bound, t.timed));
    gsl_rng_free(random);
    return 0;
}
