#include "physics/whole_multiples.h"

#include <glib.h>
#include <math.h>

static const double E = 1.602176634e-19; /* CODATA 2018, exact */

static void exact_charge(void)
{
    const RfWholeMultiple three = rf_whole_multiples_nearest((RfValue){-3.0 * E, 0.0});
    g_assert_cmpint(three.n, ==, -3);
    g_assert_cmpfloat(three.probability, ==, 1.0);
}

static void hopeless_sigma_spreads_evenly(void)
{
    const RfWholeMultiple any = rf_whole_multiples_nearest((RfValue){40.0 * E, 20.0 * E});
    g_assert_cmpint(any.n, ==, 40);
    g_assert_cmpfloat_with_epsilon(any.probability, 1.0 / (20.0 * sqrt(2.0 * G_PI)), 1e-12);
}

/* Sum over integers written out. */
static void probability_is_the_plain_sum(void)
{
    for (double sigma = 0.05; sigma < 5.0; sigma *= 1.4) {
        for (double q = -3.5; q < 3.5; q += 0.17) {
            const RfWholeMultiple found = rf_whole_multiples_nearest((RfValue){q * E, sigma * E});
            double sum = 0.0;
            for (int n = -60; n <= 60; n++)
                sum += exp(-0.5 * ((q - n) * (q - n) - (q - found.n) * (q - found.n)) / (sigma * sigma));
            g_assert_cmpfloat_with_epsilon(found.probability, 1.0 / sum, 1e-10);
        }
    }
}

/* Half way between two: even odds. At sigma 0.25 on an integer: exp(-8) twice on either side. */
static void known_odds(void)
{
    g_assert_cmpfloat_with_epsilon(
        rf_whole_multiples_nearest((RfValue){2.4999999999 * E, 0.1 * E}).probability, 0.5, 1e-6);
    g_assert_cmpfloat_with_epsilon(rf_whole_multiples_nearest((RfValue){-4.0 * E, 0.25 * E}).probability,
                                   1.0 / (1.0 + 2.0 * exp(-8.0)), 1e-9);
}

/* The nearest integer can be certain among integers and yet not fit. */
static void deviation_tells_a_misfit(void)
{
    const RfWholeMultiple misfit = rf_whole_multiples_nearest((RfValue){2.3 * E, 0.03 * E});
    g_assert_cmpint(misfit.n, ==, 2);
    g_assert_cmpfloat(misfit.probability, >, 0.999);
    g_assert_cmpfloat_with_epsilon(misfit.deviation, 10.0, 1e-9);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/whole_multiples/nearest/exact-charge", exact_charge);
    g_test_add_func("/whole_multiples/nearest/hopeless-sigma-spreads-evenly", hopeless_sigma_spreads_evenly);
    g_test_add_func("/whole_multiples/nearest/known-odds", known_odds);
    g_test_add_func("/whole_multiples/nearest/is-the-plain-sum", probability_is_the_plain_sum);
    g_test_add_func("/whole_multiples/nearest/deviation-tells-a-misfit", deviation_tells_a_misfit);
    return g_test_run();
}
