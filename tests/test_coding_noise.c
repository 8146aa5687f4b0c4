#include "tracker/coding_noise.h"

#include <gsl/gsl_errno.h>
#include <gsl/gsl_randist.h>
#include <math.h>

enum { SPOTS = 24 };
static const float STATED_PX = 0.05f;

/* What a recording's fits leave in one picture. */
typedef struct {
    RfCoding coding;
    double excess;
} Picture;

static RfSightings *sight(const Picture *cycle, unsigned kinds, unsigned pictures, uint32_t flags)
{
    RfSightings *sightings = rf_sightings_new(640, 480, 1);
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, 1867);
    for (unsigned e = 0; e < pictures; e++) {
        const Picture *picture = &cycle[e % kinds];
        RfExposure exposure = {.frame = e,
                               .time_s = e / 30.0,
                               .first_spot = sightings->spots->len,
                               .spots = SPOTS,
                               .coding = (uint8_t)picture->coding};
        g_array_append_val(sightings->exposures, exposure);
        for (int i = 0; i < SPOTS; i++) {
            RfSpot spot = {.x_px = (float)(40 * i),
                           .u_x_px = STATED_PX,
                           .u_y_px = STATED_PX,
                           .cov_xy_px2 = 1e-4f,
                           .flags = flags,
                           .excess = (float)(picture->excess * gsl_ran_chisq(random, 1))};
            g_array_append_val(sightings->spots, spot);
        }
    }
    gsl_rng_free(random);
    return sightings;
}

/* Mean square of u over the stated one in pictures `from`, `from` + step ... */
static double widened(const RfSightings *sightings, unsigned from, unsigned step)
{
    double sum = 0, n = 0;
    for (unsigned e = from; e < sightings->exposures->len; e += step)
        for (unsigned i = 0; i < SPOTS; i++, n++)
            sum +=
                pow((double)(g_array_index(sightings->spots, RfSpot, e * SPOTS + i).u_x_px / STATED_PX), 2);
    return sum / n;
}

/* Noise as modelled: what is stated stays within 1 % (that is 2 % of its square), whatever the pictures were coded from. */
static void test_lossless(void)
{
    static const RfCoding codings[] = {RF_CODING_UNKNOWN, RF_CODING_ALONE, RF_CODING_PAST, RF_CODING_BOTH};
    for (unsigned k = 0; k < G_N_ELEMENTS(codings); k++) {
        Picture white = {codings[k], 1};
        g_autoptr(RfSightings) sightings = sight(&white, 1, 4000, 0);
        rf_coding_noise_apply(sightings, true);
        double factor = widened(sightings, 0, 1);
        g_test_message("coding %d: variance times %.4f", (int)codings[k], factor);
        g_assert_cmpfloat(factor, <, 1.02);
        g_assert_cmpfloat(factor, >=, 1);
    }
}

/* Three kinds of pictures in turn: each gets its own factor, the same on both axes and the covariance. */
static void test_kinds(void)
{
    const Picture cycle[] = {{RF_CODING_ALONE, 2.3}, {RF_CODING_BOTH, 5}, {RF_CODING_PAST, 3.2}};
    g_autoptr(RfSightings) sightings = sight(cycle, 3, 900, 0);
    rf_coding_noise_apply(sightings, true);
    for (unsigned k = 0; k < 3; k++) {
        double expected = rf_coding_noise_factor(cycle[k].coding, true, false, cycle[k].excess);
        double found = widened(sightings, k, 3);
        g_test_message("kind %u: variance times %.3f, expected %.3f", k, found, expected);
        g_assert_cmpfloat_with_epsilon(found, expected, 0.06 * expected);
    }
    const RfSpot *spot = &g_array_index(sightings->spots, RfSpot, 0);
    g_assert_cmpfloat(spot->u_x_px, ==, spot->u_y_px);
    g_assert_cmpfloat_with_epsilon((double)(spot->cov_xy_px2 / 1e-4f),
                                   pow((double)(spot->u_x_px / STATED_PX), 2), 1e-5);
}

/* Pictures of one kind that differ among themselves, as a bit rate held constant makes them. */
static void test_pictures_differ(void)
{
    const Picture cycle[] = {{RF_CODING_PAST, 2}, {RF_CODING_PAST, 6}};
    g_autoptr(RfSightings) sightings = sight(cycle, 2, 600, 0);
    rf_coding_noise_apply(sightings, true);
    double calm = widened(sightings, 0, 2), rough = widened(sightings, 1, 2);
    g_test_message("variance times %.2f and %.2f", calm, rough);
    g_assert_cmpfloat(rough, >, 1.7 * calm);
}

/* One spot in eight that no droplet's shape fits: the good spots' quantile taken is 4/7 in place of 1/2, which for a
 * chi-square of one is 1.38 times as much, or 1.17 in u, and a little more by the pictures' own means. */
static void test_misfits(void)
{
    const Picture picture = {RF_CODING_ALONE, 3};
    g_autoptr(RfSightings) sightings = sight(&picture, 1, 900, 0);
    for (unsigned i = 0; i < sightings->spots->len; i += 8)
        g_array_index(sightings->spots, RfSpot, i).excess = 200;
    double total = rf_coding_noise_apply(sightings, true);
    g_assert_cmpfloat_with_epsilon(total * total, widened(sightings, 0, 1), 1e-4);
    double found = widened(sightings, 0, 1),
           expected = rf_coding_noise_factor(RF_CODING_ALONE, true, false, 3);
    g_test_message("variance times %.3f, without misfits %.3f", found, expected);
    g_assert_cmpfloat(sqrt(found / expected), <, 1.2);
}

/* Never below what the fit says; more with more excess; most where pictures were predicted, and from smoothed ones. */
static void test_law(void)
{
    for (int coding = 0; coding < RF_CODINGS; coding++) {
        g_assert_cmpfloat(rf_coding_noise_factor((RfCoding)coding, true, false, 0.7), ==, 1);
        g_assert_cmpfloat(rf_coding_noise_factor((RfCoding)coding, true, false, 1), ==, 1);
        double before = 1;
        for (double excess = 1.1; excess < 20; excess *= 1.3) {
            double now = rf_coding_noise_factor((RfCoding)coding, true, false, excess);
            g_assert_cmpfloat(now, >, before);
            before = now;
        }
    }
    double alone = rf_coding_noise_factor(RF_CODING_ALONE, true, false, 5);
    double rough = rf_coding_noise_factor(RF_CODING_PAST, false, false, 5);
    double past = rf_coding_noise_factor(RF_CODING_PAST, true, false, 5);
    double both = rf_coding_noise_factor(RF_CODING_BOTH, true, false, 5);
    double jpeg = rf_coding_noise_factor(RF_CODING_ALONE, false, false, 5);
    g_assert_cmpfloat(alone, >, jpeg);
    g_assert_cmpfloat(rough, >, jpeg);
    g_assert_cmpfloat(past, >, rough);
    g_assert_cmpfloat(both, >, past);
}

/* Every fourth spot on a line, with more left there: both get their own factor, and a film with next to none on lines
 * gives those few what the others get. */
static void test_lines(void)
{
    const Picture picture = {RF_CODING_PAST, 3};
    g_autoptr(RfSightings) sightings = sight(&picture, 1, 3600, 0);
    g_autoptr(RfSightings) hardly = sight(&picture, 1, 3600, 0);
    for (unsigned i = 0; i < sightings->spots->len; i += 4) {
        RfSpot *spot = &g_array_index(sightings->spots, RfSpot, i);
        spot->flags = RF_SPOT_LINE;
        spot->excess *= 2;
    }
    g_array_index(hardly->spots, RfSpot, 8).flags = RF_SPOT_LINE;
    rf_coding_noise_apply(sightings, true);
    rf_coding_noise_apply(hardly, true);
    for (unsigned line = 0; line < 2; line++) {
        double expected = rf_coding_noise_factor(RF_CODING_PAST, true, line, line ? 6 : 3), sum = 0, n = 0;
        for (unsigned i = !line; i < sightings->spots->len; i += 4, n++)
            sum += pow((double)(g_array_index(sightings->spots, RfSpot, i).u_x_px / STATED_PX), 2);
        g_test_message("line %u: variance times %.2f, expected %.2f", line, sum / n, expected);
        g_assert_cmpfloat_with_epsilon(sum / n, expected, 0.06 * expected);
    }
    g_assert_cmpfloat(g_array_index(hardly->spots, RfSpot, 8).u_x_px, ==,
                      g_array_index(hardly->spots, RfSpot, 9).u_x_px);
}

static void test_nothing_known(void)
{
    Picture rough = {RF_CODING_PAST, 9};
    g_autoptr(RfSightings) crowded = sight(&rough, 1, 100, RF_SPOT_CROWDED);
    rf_coding_noise_apply(crowded, true);
    g_assert_cmpfloat(widened(crowded, 0, 1), ==, 1);
    g_autoptr(RfSightings) few = sight(&rough, 1, 1, 0);
    rf_coding_noise_apply(few, true);
    g_assert_cmpfloat(widened(few, 0, 1), ==, 1);
    g_autoptr(RfSightings) none = rf_sightings_new(64, 48, 1);
    rf_coding_noise_apply(none, true);
    g_assert_cmpuint(none->spots->len, ==, 0);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/coding-noise/limits/law", test_law);
    g_test_add_func("/coding-noise/limits/lossless", test_lossless);
    g_test_add_func("/coding-noise/apply/kinds", test_kinds);
    g_test_add_func("/coding-noise/apply/pictures-differ", test_pictures_differ);
    g_test_add_func("/coding-noise/apply/misfits", test_misfits);
    g_test_add_func("/coding-noise/apply/lines", test_lines);
    g_test_add_func("/coding-noise/apply/nothing-known", test_nothing_known);
    return g_test_run();
}
