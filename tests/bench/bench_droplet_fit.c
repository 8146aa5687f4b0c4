/* The estimator against truth and against the bound, over at least 1000 droplets: coverage, efficiency, speed. Prints
 * figures, judges nothing. Argument: number of droplets (1200). */
#include <gsl/gsl_errno.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>

#include "physics/constants.h"
#include "physics/expectation.h"
#include "tests/support/droplet_walk.h"

static const double E = RF_ELEMENTARY_CHARGE_COULOMB;

typedef struct {
    unsigned n, failed, within_1, within_2, disagree;
    double squares_over_bound, sigma_over_bound, seconds, samples;
} Tally;

static Walk random_walk(const RfFieldTimeline *timeline, gsl_rng *random)
{
    double end_s = 5 + 35 * gsl_rng_uniform(random);
    return (Walk){.medium = &WALK_MEDIUM,
                  .timeline = timeline,
                  .radius_m = (0.3 + 0.6 * gsl_rng_uniform(random)) * 1e-6,
                  .charge_coulomb = E * ((double)gsl_rng_uniform_int(random, 11) - 5),
                  .end_s = end_s,
                  .frame_s = 1.0 / 30,
                  .exposure = gsl_rng_uniform(random),
                  .noise_m = (0.05 + 0.5 * gsl_rng_uniform(random)) * 1e-6,
                  .missing = 0.05};
}

static double on_seconds(const RfFieldTimeline *timeline, double end_s)
{
    return rf_field_timeline_impulse_v_s(timeline, end_s) / 400;
}

static void measure(const RfFieldTimeline *timeline, gsl_rng *random, Tally *tally)
{
    Walk walk = random_walk(timeline, random);
    RfTrail trail = walk_trail_new(&walk, 1, random);
    RfDropletModel model = {.medium = &WALK_MEDIUM, .timeline = timeline};
    RfDropletFit fit;
    gint64 start = g_get_monotonic_time();
    rf_droplet_fit(&trail, &model, &fit);
    tally->seconds += (double)(g_get_monotonic_time() - start) * 1e-6;
    tally->samples += (double)trail.n;
    walk_trail_clear(&trail);
    tally->n++;
    if (fit.state != RF_FIT_DONE) {
        tally->failed++;
        return;
    }
    double on_s = on_seconds(timeline, walk.end_s);
    const RfObservation observation = {walk.end_s - on_s, on_s, 400, 28.5, walk.noise_m,
                                       walk.exposure / 6, 1e-3};
    const RfExpectation best =
        rf_expectation_find(&WALK_MEDIUM, &observation, walk.radius_m, walk.charge_coulomb);
    RfValue charge = fit.spell[0].charge_coulomb;
    double miss = fabs(charge.value - walk.charge_coulomb), bound = best.u_charge_joint_coulomb;
    tally->within_1 += miss < charge.sigma;
    tally->within_2 += miss < 2 * charge.sigma;
    tally->disagree += fit.radius_agreement_p < 0.05;
    tally->squares_over_bound += miss * miss / (bound * bound);
    tally->sigma_over_bound += charge.sigma / bound;
}

int main(int argc, char **argv)
{
    static const double switches_s[] = {2.5,  5,  7.5,  10, 12.5, 15, 17.5, 20,
                                        22.5, 25, 27.5, 30, 32.5, 35, 37.5};
    int droplets = argc > 1 ? atoi(argv[1]) : 1200;
    gsl_set_error_handler_off();
    g_autoptr(RfFieldTimeline) timeline =
        walk_timeline_new(switches_s, G_N_ELEMENTS(switches_s), RF_FIELD_TOP_PLUS, 400, 40);
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937); /* its default seed, 4357 */
    Tally t = {0};
    for (int i = 0; i < droplets; i++) measure(timeline, random, &t);
    double done = t.n - t.failed;
    printf("droplets              %u, %u without a fit\n", t.n, t.failed);
    printf("within 1 sigma        %.3f (0.683 expected)\n", t.within_1 / done);
    printf("within 2 sigma        %.3f (0.954 expected)\n", t.within_2 / done);
    printf("rms error over bound  %.3f\n", sqrt(t.squares_over_bound / done));
    printf("sigma over bound      %.3f\n", t.sigma_over_bound / done);
    printf("radii disagree, p<.05 %.3f\n", t.disagree / done);
    printf("time per fit          %.2f ms, %.2f us per frame\n", t.seconds / t.n * 1e3,
           t.seconds / t.samples * 1e6);
    gsl_rng_free(random);
    return 0;
}
