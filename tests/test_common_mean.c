#include "physics/common_mean.h"

#include <glib.h>
#include <gsl/gsl_errno.h>
#include <gsl/gsl_randist.h>
#include <gsl/gsl_rng.h>
#include <math.h>

#define ASSERT_NEAR(seen, wanted, tolerance) g_assert_cmpfloat_with_epsilon(seen, wanted, tolerance)

static RfCommonMean *mean_of(const double *values, const double *own, const double *common, size_t n)
{
    g_autoptr(GError) error = NULL;
    RfCommonMean *mean = rf_common_mean_new(values, own, common, n, &error);
    g_assert_no_error(error);
    return mean;
}

/* Nothing shared: the weighted mean that everybody knows. */
static void independent(void)
{
    const double values[] = {1.0, 2.0, 4.0}, own[] = {1.0, 0.5, 2.0}, common[9] = {0};
    g_autoptr(RfCommonMean) mean = mean_of(values, own, common, 3);
    ASSERT_NEAR(mean->mean.value, (1.0 + 8.0 + 1.0) / 5.25, 1e-12);
    ASSERT_NEAR(mean->mean.sigma, 1.0 / sqrt(5.25), 1e-12);
    ASSERT_NEAR(mean->sigma_common, 0.0, 1e-12);
    ASSERT_NEAR(mean->parts[1].weight, 4.0 / 5.25, 1e-12);
    ASSERT_NEAR(mean->parts[0].without.value, 9.0 / 4.25, 1e-12);
    ASSERT_NEAR(mean->parts[0].without.sigma, 1.0 / sqrt(4.25), 1e-12);
    ASSERT_NEAR(mean->parts[0].offset.value, 1.0 - 9.0 / 4.25, 1e-12);
    ASSERT_NEAR(mean->parts[0].offset.sigma, sqrt(1.0 + 1.0 / 4.25), 1e-12);
}

static void single(void)
{
    const double value = 3.0, own = 0.3, common = 0.16;
    g_autoptr(RfCommonMean) mean = mean_of(&value, &own, &common, 1);
    ASSERT_NEAR(mean->mean.value, 3.0, 1e-12);
    ASSERT_NEAR(mean->mean.sigma, 0.5, 1e-12);
    ASSERT_NEAR(mean->sigma_common, 0.4, 1e-12);
    ASSERT_NEAR(mean->p, 1.0, 1e-12);
}

/* JCGM 100:2008, 5.2.2, EXAMPLE: ten resistors of 1000 ohm, each compared with the same standard, u = 100 mohm, comparison
 * itself negligible. In series u = 1 ohm, so the mean keeps 100 mohm; taken as independent, 0.32 ohm in series. */
static void gum_5_2_2_resistors(void)
{
    double values[10], own[10], common[100], none[100] = {0}, own_alone[10];
    for (int i = 0; i < 10; i++) values[i] = 1000.0, own[i] = 1e-5, own_alone[i] = 0.1;
    for (int i = 0; i < 100; i++) common[i] = 0.01;
    g_autoptr(RfCommonMean) mean = mean_of(values, own, common, 10);
    g_autoptr(RfCommonMean) independent_mean = mean_of(values, own_alone, none, 10);
    ASSERT_NEAR(mean->mean.value, 1000.0, 1e-6);
    ASSERT_NEAR(10.0 * mean->mean.sigma, 1.0, 1e-3);
    ASSERT_NEAR(10.0 * independent_mean->mean.sigma, 0.32, 0.005);
}

/* JCGM 100:2008, H.4 (activity of radon in water): six cycles against one standard. R_x 652.60(6.42)/min, R_S 206.09(3.79)/min,
 * r = 0.646, A_S = 0.1368(18) Bq/g, m_S = 5.0192(50) g, m_x = 5.0571(10) g; A_x = 0.4300 Bq/g, u_c = 0.0083 Bq/g. Each cycle
 * has sqrt(6) times the spread of the mean of six; standard and masses are common. */
static void gum_h4_activity(void)
{
    const double activity = 0.1368 * 5.0192 / 5.0571 * 652.60 / 206.09;
    const double x = 6.42 / 652.60, s = 3.79 / 206.09;
    const double ratio = sqrt(x * x + s * s - 2.0 * 0.646 * x * s);
    const double shared = hypot(0.0018 / 0.1368, hypot(0.0050 / 5.0192, 0.0010 / 5.0571));
    double values[6], own[6], common[36];
    for (int i = 0; i < 6; i++) values[i] = activity, own[i] = activity * ratio * sqrt(6.0);
    for (int i = 0; i < 36; i++) common[i] = activity * activity * shared * shared;
    g_autoptr(RfCommonMean) mean = mean_of(values, own, common, 6);
    ASSERT_NEAR(mean->mean.value, 0.4300, 1e-4); /* the inputs as printed give 0.42994 */
    ASSERT_NEAR(mean->mean.sigma, 0.0083, 5e-5);
}

/* Two published sets where unequal values share an error in per cent: the mean of covariances taken at each value lies
 * below both (from memory). 1.5 and 1.0, 10 % of their own, 20 % common: 0.88(22) (R. W. Peelle, 1987). 8.0 and 8.5, 2 % of
 * their own, 10 % common: 7.87(81), where 8.23 with 0.82 common is right (G. D'Agostini, Nucl. Instrum. Methods A 346
 * (1994) 306). */
static void shares_at_each_value(void)
{
    const double peelle[] = {1.5, 1.0}, peelle_own[] = {0.15, 0.1};
    const double peelle_common[] = {0.09, 0.06, 0.06, 0.04};
    g_autoptr(RfCommonMean) low = mean_of(peelle, peelle_own, peelle_common, 2);
    ASSERT_NEAR(low->mean.value, 0.88, 0.005);
    ASSERT_NEAR(low->mean.sigma, 0.22, 0.005);
    const double other[] = {8.0, 8.5}, other_own[] = {0.16, 0.17};
    const double other_common[] = {0.64, 0.68, 0.68, 0.7225};
    g_autoptr(RfCommonMean) also_low = mean_of(other, other_own, other_common, 2);
    ASSERT_NEAR(also_low->mean.value, 7.87, 0.005);
    ASSERT_NEAR(also_low->mean.sigma, 0.81, 0.005);
    const double relative[] = {8.0 / 8.235 - 1.0, 8.5 / 8.235 - 1.0},
                 relative_own[] = {0.16 / 8.235, 0.17 / 8.235};
    const double relative_common[] = {0.01, 0.01, 0.01, 0.01};
    g_autoptr(RfCommonMean) right = mean_of(relative, relative_own, relative_common, 2);
    ASSERT_NEAR(8.235 * (1.0 + right->mean.value), 8.23, 0.01);
    ASSERT_NEAR(8.235 * right->sigma_own, 1.0 / hypot(1.0 / 0.16, 1.0 / 0.17), 1e-9);
    ASSERT_NEAR(8.235 * right->sigma_common, 0.82, 0.01);
}

/* Leaving one out by formula is leaving it out. */
static void without_is_recomputed(void)
{
    const double values[] = {1.0, 1.3, 0.8, 1.1}, own[] = {0.1, 0.2, 0.15, 0.1};
    const double common[] = {0.04, 0.01, 0.02, 0.0, 0.01, 0.03, 0.0, 0.01,
                             0.02, 0.0,  0.05, 0.0, 0.0,  0.01, 0.0, 0.02};
    g_autoptr(RfCommonMean) all = mean_of(values, own, common, 4);
    for (size_t out = 0; out < 4; out++) {
        double v[3], o[3], c[9];
        for (size_t i = 0, k = 0; i < 4; i++) {
            if (i == out) continue;
            v[k] = values[i], o[k] = own[i];
            for (size_t j = 0, l = 0; j < 4; j++)
                if (j != out) c[3 * k + l++] = common[4 * i + j];
            k++;
        }
        g_autoptr(RfCommonMean) rest = mean_of(v, o, c, 3);
        ASSERT_NEAR(all->parts[out].without.value, rest->mean.value, 1e-12);
        ASSERT_NEAR(all->parts[out].without.sigma, rest->mean.sigma, 1e-12);
    }
}

/* Values with shared errors: mean, deviates and chi-squared are as spread as they say. 4000 sets, seed 5. */
static void honest_spread(void)
{
    enum { N = 5, SETS = 4000 };
    const double own[N] = {0.1, 0.2, 0.15, 0.3, 0.1}, share[N] = {0.3, 0.3, 0.3, 0.1, 0.0},
                 pair[N] = {0, 0, 0.2, 0.2, 0};
    double common[N * N];
    for (int i = 0; i < N * N; i++) common[i] = share[i / N] * share[i % N] + pair[i / N] * pair[i % N];
    gsl_rng *rng = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(rng, 5);
    double mean2 = 0, deviate2 = 0, chi2 = 0;
    int in_a_hundred = 0;
    for (int set = 0; set < SETS; set++) {
        double values[N];
        const double all = gsl_ran_ugaussian(rng), two = gsl_ran_ugaussian(rng);
        for (int i = 0; i < N; i++)
            values[i] = gsl_ran_gaussian(rng, own[i]) + all * share[i] + two * pair[i];
        g_autoptr(RfCommonMean) mean = mean_of(values, own, common, N);
        mean2 += mean->mean.value * mean->mean.value / (mean->mean.sigma * mean->mean.sigma) / SETS;
        for (int i = 0; i < N; i++) deviate2 += mean->parts[i].deviate * mean->parts[i].deviate / SETS / N;
        chi2 += mean->chi_squared / SETS;
        in_a_hundred += mean->most_off_p < 0.01;
    }
    gsl_rng_free(rng);
    g_test_message("mean %.3f, deviates %.3f, chi-squared %.3f of 4, most off at 0.01: %d of %d", mean2,
                   deviate2, chi2, in_a_hundred, SETS);
    ASSERT_NEAR(mean2, 1.0, 4.0 * sqrt(2.0 / SETS));
    ASSERT_NEAR(deviate2, 1.0, 4.0 * sqrt(2.0 / SETS));
    ASSERT_NEAR(chi2, 4.0, 4.0 * sqrt(8.0 / SETS));
    g_assert_cmpint(in_a_hundred, <=, 60); /* Sidak's bound: 40, and 3 sigma of counting */
    g_assert_cmpint(in_a_hundred, >=, 12);
}

static void finds_the_one_that_is_off(void)
{
    const double values[] = {0.01, -0.01, 0.0, 0.06, 0.01}, own[] = {0.01, 0.01, 0.01, 0.01, 0.01};
    double common[25];
    for (int i = 0; i < 25; i++) common[i] = 0.01;
    g_autoptr(RfCommonMean) mean = mean_of(values, own, common, 5);
    g_assert_cmpuint(mean->most_off, ==, 3);
    ASSERT_NEAR(mean->parts[3].offset.value, 0.0575, 1e-9);
    ASSERT_NEAR(mean->parts[3].offset.sigma, sqrt(1e-4 + 0.25e-4), 1e-9);
    g_assert_cmpfloat(mean->most_off_p, <, 1e-5);
    g_assert_cmpfloat(mean->p, <, 1e-4);
}

static void not_definite(void)
{
    const double values[] = {1.0, 2.0}, own[] = {0.0, 0.0}, common[] = {1.0, 1.0, 1.0, 1.0};
    g_autoptr(GError) error = NULL;
    g_assert_null(rf_common_mean_new(values, own, common, 2, &error));
    g_assert_nonnull(error);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/common_mean/nothing-shared", independent);
    g_test_add_func("/common_mean/single-value", single);
    g_test_add_func("/common_mean/gum-5.2.2-resistors", gum_5_2_2_resistors);
    g_test_add_func("/common_mean/gum-h4-activity", gum_h4_activity);
    g_test_add_func("/common_mean/shares-at-each-value", shares_at_each_value);
    g_test_add_func("/common_mean/without-is-recomputed", without_is_recomputed);
    g_test_add_func("/common_mean/honest-spread", honest_spread);
    g_test_add_func("/common_mean/finds-the-one-that-is-off", finds_the_one_that_is_off);
    g_test_add_func("/common_mean/not-definite", not_definite);
    return g_test_run();
}
